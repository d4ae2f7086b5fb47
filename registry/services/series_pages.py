"""Series and their studies, as the first page and the forms show them."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import TYPE_CHECKING, Any

from registry.errors import AlreadyThere, Fault, InputRefused, NotAllowed
from registry.services.access import ROLES, Role, covers, require_series
from registry.services.people import Person
from registry.services.text_check import checked_name, checked_text
from registry.storage.engine import Database
from registry.storage.history import append_registry_event, lock_registry
from registry.storage.pinned import latest_headlines
from registry.storage.studies import (
    TrialCount,
    factors_of_series,
    new_series_row,
    plans_of,
    responses_of_series,
    series_named,
    series_open_to,
    studies_of,
    trial_counts,
)

if TYPE_CHECKING:
    from registry.storage.tables import Plan, Series, Study


@dataclass(frozen=True)
class StudyLine:
    """One study as a line of its series; ``headline`` is what a closed one found, in one sentence."""

    id: int
    title: str
    site: str
    time_zone: str
    status: str
    close_reason: str | None
    planned: int | None
    logged: int
    set_aside: int
    last_trial: datetime | None
    created_at: datetime
    closed_at: datetime | None
    headline: str | None


@dataclass(frozen=True)
class SeriesLine:
    """One series with its studies in order of time, and what the person may do in it."""

    id: int
    name: str
    about: str
    role: Role
    studies: tuple[StudyLine, ...]

    def may(self, role: Role) -> bool:
        """Whether the person's role covers this one."""
        return covers(self.role, role)


@dataclass(frozen=True)
class Home:
    """Every series that a person may see."""

    series: tuple[SeriesLine, ...]
    may_start_series: bool


@dataclass(frozen=True)
class SeriesDraft:
    """A series about to be started."""

    name: str
    about: str


@dataclass(frozen=True)
class KnownFactor:
    """A factor that studies of the series have used, with every level it has had."""

    name: str
    levels: tuple[str, ...]


@dataclass(frozen=True)
class KnownResponse:
    """A response that studies of the series have read, as the latest one recorded it."""

    name: str
    about: str
    unit: str
    step: str
    margin: str | None
    wanted: str
    kind: str
    part: str


@dataclass(frozen=True)
class SeriesDetail:
    """A series and what its next study can take over."""

    line: SeriesLine
    factors: tuple[KnownFactor, ...]
    responses: tuple[KnownResponse, ...]
    sites: tuple[str, ...]


def home(database: Database, person: Person) -> Home:
    """Show every series a person may see, in a number of queries that does not grow with them."""
    with database.read() as session:
        open_to = series_open_to(session, person.id, keeper=person.keeper)
        lines = _lines(session, [(series, _role(role)) for series, role in open_to])
    return Home(tuple(lines), may_start_series=person.keeper)


def _role(code: str) -> Role:
    return next(role for role in ROLES if role == code)


def _lines(session: Any, open_to: list[tuple[Series, Role]]) -> list[SeriesLine]:
    studies = studies_of(session, [series.id for series, _ in open_to])
    ids = [study.id for study in studies]
    plans, counts, headlines = plans_of(session, ids), trial_counts(session, ids), latest_headlines(session, ids)
    return [
        SeriesLine(
            series.id,
            series.name,
            series.about,
            role,
            tuple(
                _line(study, plans.get(study.id), counts.get(study.id, TrialCount()), headlines.get(study.id))
                for study in studies
                if study.series_id == series.id
            ),
        )
        for series, role in open_to
    ]


def _line(study: Study, plan: Plan | None, count: TrialCount, headline: str | None) -> StudyLine:
    return StudyLine(
        id=study.id,
        title=study.title,
        site=study.site,
        time_zone=study.time_zone,
        status=study.status,
        close_reason=study.close_reason,
        planned=plan.planned if plan else None,
        logged=count.logged,
        set_aside=count.set_aside,
        last_trial=count.last,
        created_at=study.created_at,
        closed_at=study.closed_at,
        headline=headline,
    )


def new_series(database: Database, person: Person, draft: SeriesDraft, *, now: datetime) -> int:
    """Start a series; returns its key."""
    if not person.keeper:
        raise NotAllowed(Fault("series", "only a keeper of the registry may start one", "ask a keeper of the registry"))
    faults: list[Fault] = []
    name = checked_name(draft.name, where="name", field="name", faults=faults)
    about = checked_text(draft.about, where="about", field="about", faults=faults)
    if faults:
        raise InputRefused(faults)
    with database.write() as session:
        lock_registry(session)  # Nobody else may take the name between the look and the writing.
        if series_named(session, name) is not None:
            raise AlreadyThere(
                Fault(
                    "name", f"there is a series {name!r} already", "add a study to it, or choose another name", "name"
                )
            )
        row = new_series_row(session, name=name, about=about, person_id=person.id, now=now)
        append_registry_event(session, "series_made", person_id=person.id, after=f"{row.id}", now=now)
        return row.id


def series_detail(database: Database, person: Person, series_id: int) -> SeriesDetail:
    """Show a series with what its next study can take over."""
    with database.read() as session:
        series, role = require_series(session, person, series_id, at_least="viewer")
        (line,) = _lines(session, [(series, role)])
        factors = tuple(
            KnownFactor(factor.name, tuple(level.name for level in levels))
            for factor, levels in factors_of_series(session, series_id)
        )
        responses = tuple(
            KnownResponse(
                name=response.name,
                about=response.about,
                unit=used.unit if used else "",
                step=used.step if used else "",
                margin=used.margin if used else None,
                wanted=response.wanted,
                kind=response.kind,
                part=response.part,
            )
            for response, used in responses_of_series(session, series_id)
        )
    sites = tuple(dict.fromkeys(study.site for study in reversed(line.studies)))
    return SeriesDetail(line, factors, responses, sites)
