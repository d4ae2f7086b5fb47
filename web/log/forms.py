"""The form of one trial, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from uuid import uuid4
from zoneinfo import ZoneInfo

from registry.errors import Fault, InputRefused
from registry.services.run_order import RunShown
from registry.services.study_card import FactorLine, StudyCard
from registry.services.trial_log import TrialEntry


@dataclass(frozen=True)
class TrialForm:
    """One trial as typed; the key is made with the form, so that sending it twice logs one trial."""

    key: str
    levels: Mapping[str, str]
    readings: Mapping[str, str]
    happened_at: str
    note: str
    run: str

    @classmethod
    def first(cls, card: StudyCard, *, block: str, following: RunShown | None) -> TrialForm:
        """Start under a fresh key, with the levels of the next run, or the block that was logged last."""
        if following is not None:
            return cls(str(uuid4()), following.levels, {}, "", "", str(following.position))
        levels = {card.block.name: block} if card.block else {}
        return cls(str(uuid4()), levels, {}, "", "", "")

    @classmethod
    def read(cls, sent: Mapping[str, str], card: StudyCard) -> TrialForm:
        """Read the form as it was typed."""
        return cls(
            key=sent.get("key", ""),
            levels={factor.name: sent.get(f"levels-{factor.name}", "") for factor in factors_to_choose(card)},
            readings={line.name: sent.get(f"readings-{line.name}", "") for line in card.responses},
            happened_at=sent.get("happened_at", ""),
            note=sent.get("note", ""),
            run=sent.get("run", ""),
        )

    def entry(self, card: StudyCard) -> TrialEntry:
        """Hand the form on; a time without zone is the site's own clock."""
        return TrialEntry(self.key, self.levels, self.readings, self._moment(card), None, self.note, self._run())

    def _run(self) -> int | None:
        text = self.run.strip()
        if not text:
            return None
        if not (text.isascii() and text.isdigit() and len(text) < 10):
            raise InputRefused(Fault("run", f"{text!r} given", "give the place of a run in the run order", "run"))
        return int(text)

    def again(self) -> TrialForm:
        """Keep what was typed under a fresh key, for a trial that is another one after all."""
        return replace(self, key=str(uuid4()))

    def _moment(self, card: StudyCard) -> datetime | None:
        text = self.happened_at.strip()
        if not text:
            return None
        try:
            moment = datetime.fromisoformat(text)
        except ValueError:
            raise InputRefused(
                Fault("time", f"{text!r} given", "write it as 2026-03-02 14:05, or leave it empty", "happened_at")
            ) from None
        return moment if moment.tzinfo else _on_the_clock(moment, ZoneInfo(card.time_zone))


def _on_the_clock(moment: datetime, zone: ZoneInfo) -> datetime:
    """Take a time as the clock of a site shows it; an hour that the clock skips never was."""
    local = moment.replace(tzinfo=zone)
    if moment.year > 1970 and local.astimezone(UTC).astimezone(zone).replace(tzinfo=None) != moment:
        raise InputRefused(
            Fault("time", f"{moment:%Y-%m-%d %H:%M} was skipped by the clock there", "check the hour", "happened_at")
        )
    return local


def factors_to_choose(card: StudyCard) -> tuple[FactorLine, ...]:
    """List the factors that a trial has a level of, the block first, because it changes least often."""
    return (*([card.block] if card.block else []), *card.factors)


@dataclass(frozen=True)
class SkipForm:
    """Why a run is left out, as typed."""

    run: str = ""
    skip_reason: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> SkipForm:
        """Read the form as it was typed."""
        return cls(sent.get("run", ""), sent.get("skip_reason", ""))
