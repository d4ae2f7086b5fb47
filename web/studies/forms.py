"""The forms of a new series and a new study, as they were typed."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from typing import Literal, TypeVar

from registry.errors import Fault, InputRefused
from registry.services.series_pages import SeriesDraft
from registry.services.study_card import FactorLine, StudyCard
from registry.services.study_start import FactorDraft, ResponseDraft, StudyDraft
from web.forms import lines_of

MOST_ROWS = 40
Row = TypeVar("Row")
_STEP_OF_FORM = re.compile(r"(add|remove)-(factor|response)(?:-(\d{1,2}))?")


@dataclass(frozen=True)
class NewSeriesForm:
    """A series as typed."""

    name: str = ""
    about: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> NewSeriesForm:
        """Read the form that was sent."""
        return cls(sent.get("name", ""), sent.get("about", ""))

    def draft(self) -> SeriesDraft:
        """Give what the registry is asked to keep."""
        return SeriesDraft(self.name, self.about)


@dataclass(frozen=True)
class FactorTyped:
    """One factor as typed; its levels one a line."""

    name: str = ""
    role: str = "treatment"
    levels: str = ""

    def is_blank(self) -> bool:
        """Whether nothing was typed."""
        return not (self.name.strip() or self.levels.strip())

    def draft(self) -> FactorDraft:
        """Give what the registry is asked to keep."""
        return FactorDraft(self.name, self.role, lines_of(self.levels))


@dataclass(frozen=True)
class ResponseTyped:
    """One response as typed."""

    name: str = ""
    about: str = ""
    unit: str = ""
    step: str = ""
    margin: str = ""
    wanted: str = "lower"
    kind: str = "measured"
    part: str = "primary"

    def is_blank(self) -> bool:
        """Whether nothing was typed."""
        return not any(text.strip() for text in (self.name, self.about, self.step, self.margin))

    def draft(self) -> ResponseDraft:
        """Give what the registry is asked to keep."""
        return ResponseDraft(
            name=self.name,
            about=self.about,
            unit=self.unit,
            step=self.step,
            margin=self.margin,
            wanted=self.wanted,
            kind=self.kind,
            part=self.part,
        )


@dataclass(frozen=True)
class FormStep:
    """What a button of the form asks for: one more row, or one row less."""

    what: Literal["add", "remove"]
    rows: Literal["factors", "responses"]
    place: int


@dataclass(frozen=True)
class NewStudyForm:
    """A study as typed, with as many rows of factors and responses as there are."""

    title: str = ""
    question: str = ""
    site: str = ""
    time_zone: str = ""
    factors: tuple[FactorTyped, ...] = (FactorTyped(), FactorTyped())
    responses: tuple[ResponseTyped, ...] = (ResponseTyped(),)

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> NewStudyForm:
        """Read the form that was sent."""
        return cls(
            title=sent.get("title", ""),
            question=sent.get("question", ""),
            site=sent.get("site", ""),
            time_zone=sent.get("time_zone", ""),
            factors=tuple(FactorTyped(**row) for row in _rows(sent, "factors", FactorTyped)),
            responses=tuple(ResponseTyped(**row) for row in _rows(sent, "responses", ResponseTyped)),
        )

    @classmethod
    def like(cls, card: StudyCard) -> NewStudyForm:
        """Fill the form in from an earlier study; title and question are the new one's own."""
        lines = [*card.factors, *([card.block] if card.block else []), *card.held]
        return cls(
            site=card.site,
            time_zone=card.time_zone,
            factors=tuple(_factor_typed(line) for line in lines),
            responses=tuple(
                ResponseTyped(
                    name=line.name,
                    about=line.about,
                    unit=line.unit,
                    step=line.step,
                    margin=line.margin or "",
                    wanted=line.wanted,
                    kind=line.kind,
                    part=line.part,
                )
                for line in card.responses
            ),
        )

    def changed(self, step: FormStep) -> NewStudyForm:
        """Give the form with one more row, or one less; the rest stays as typed."""
        if step.rows == "factors":
            return replace(self, factors=_changed(self.factors, step, FactorTyped()))
        return replace(self, responses=_changed(self.responses, step, ResponseTyped(part="guard")))

    def compact(self) -> NewStudyForm:
        """Leave rows out in which nothing was typed, so that faults name the rows that are shown."""
        return replace(
            self,
            factors=tuple(row for row in self.factors if not row.is_blank()),
            responses=tuple(row for row in self.responses if not row.is_blank()),
        )

    def with_room(self) -> NewStudyForm:
        """Give at least one row of each kind to type in."""
        return replace(self, factors=self.factors or (FactorTyped(),), responses=self.responses or (ResponseTyped(),))

    def draft(self) -> StudyDraft:
        """Give what the registry is asked to keep."""
        return StudyDraft(
            title=self.title,
            question=self.question,
            site=self.site,
            time_zone=self.time_zone,
            factors=tuple(row.draft() for row in self.factors),
            responses=tuple(row.draft() for row in self.responses),
        )


def form_step(text: str) -> FormStep | None:
    """Read which row a button asks for; nothing when it asks to make the study."""
    match = _STEP_OF_FORM.fullmatch(text)
    if match is None:
        return None
    what: Literal["add", "remove"] = "add" if match[1] == "add" else "remove"
    rows: Literal["factors", "responses"] = "factors" if match[2] == "factor" else "responses"
    return FormStep(what, rows, int(match[3] or 0))


def _factor_typed(line: FactorLine) -> FactorTyped:
    return FactorTyped(line.name, line.role, "\n".join(line.levels))


def _rows(sent: Mapping[str, str], rows: str, kind: type[FactorTyped] | type[ResponseTyped]) -> list[dict[str, str]]:
    """Read rows named like factors-0-name, from 0 on for as long as there are any."""
    names = [field.name for field in fields(kind)]
    read: list[dict[str, str]] = []
    while any(f"{rows}-{len(read)}-{name}" in sent for name in names):
        if len(read) == MOST_ROWS:
            raise InputRefused(Fault(rows, f"more than {MOST_ROWS} sent", f"send at most {MOST_ROWS}", rows))
        place = len(read)
        read.append({name: sent.get(f"{rows}-{place}-{name}", "") for name in names})
    return read


def _changed(rows: tuple[Row, ...], step: FormStep, fresh: Row) -> tuple[Row, ...]:
    if step.what == "add":
        return (*rows, fresh) if len(rows) < MOST_ROWS else rows
    return rows[: step.place] + rows[step.place + 1 :]
