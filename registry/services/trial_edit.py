"""Putting a trial right: correcting a reading, setting aside, restoring, and a finer step."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime
from fractions import Fraction

from registry.errors import Fault, InputRefused, NotFound, NotNow
from registry.services.access import require_study
from registry.services.people import Person
from registry.services.pinning import pin_result
from registry.services.trial_check import FARTHEST_READING, checked_reading, far_reading, shown_reading
from registry.storage.engine import Database
from registry.storage.frame import FrameResponse, StudyFrame, fetch_frame
from registry.storage.history import Happening
from registry.storage.studies import set_anchor, set_step
from registry.storage.tables import Reading, Trial
from registry.storage.tallies import TallyKey, change_tallies, rescale_response, span_of_readings
from registry.storage.trials import find_trial, new_reading, readings_of
from registry.storage.units import StudyUnit, write_study
from registry.trials.readings import Step
from registry.trials.tallies import EMPTY, MAX_DISTANCE, Tally

LONGEST_REASON = 500


@dataclass
class _Bench:
    """One trial on the bench: its rows, its study's frame, and the open write."""

    unit: StudyUnit
    frame: StudyFrame
    trial: Trial
    readings: dict[int, Reading]

    def reading(self, response: FrameResponse) -> Reading:
        """Find the trial's reading of a response, or refuse saying there is none."""
        reading = self.readings.get(response.response_id)
        if reading is None:
            raise NotFound(
                Fault(f"trial {self.trial.number}", f"it has no reading of {response.name}", "correct it to add one")
            )
        return reading

    def counted(self, reading: Reading | None) -> bool:
        """Whether the tallies count this reading."""
        return reading is not None and reading.kept and self.trial.kept

    def weigh(self, *changes: tuple[FrameResponse, int, int]) -> None:
        """Add (+1) or take (-1) readings, given in steps, to or from the tallies of the trial's cell."""
        totals: dict[TallyKey, Tally] = {}
        for response, steps, sign in changes:
            key = TallyKey(response.response_id, self.trial.cell)
            distance = steps - (response.anchor or 0)
            part = totals.get(key, EMPTY)
            totals[key] = part.add(distance) if sign > 0 else part.remove(distance)
        change_tallies(self.unit.session, self.unit.study.id, totals)


def _named_response(frame: StudyFrame, name: str) -> FrameResponse:
    """Find a response of the study by name, or refuse saying which there are."""
    found = frame.response(name)
    if found is None:
        names = ", ".join(response.name for response in frame.responses)
        raise InputRefused(
            Fault("response", f"this study has no response {name!r}", f"its responses are {names}", "response")
        )
    return found


@contextmanager
def _on_bench(
    database: Database, person: Person, study_id: int, number: int, *, reason: str, now: datetime
) -> Iterator[tuple[_Bench, str]]:
    """Open one trial for a change that needs a reason."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_logged_study(unit)
        trial = find_trial(unit.session, study_id, number)
        if trial is None:
            raise NotFound(Fault("trial", f"{unit.study.title} has no trial {number}", "choose one from its trials"))
        readings = readings_of(unit.session, study_id, [number])[number]
        frame = fetch_frame(unit.session, study_id)
        bench = _Bench(unit, frame, trial, {reading.response_id: reading for reading in readings})
        yield bench, _checked_reason(reason)
        if unit.study.status == "closed":
            pin_result(unit, now=now)


def _require_logged_study(unit: StudyUnit) -> None:
    if unit.study.status not in ("running", "closed"):
        raise NotNow(
            Fault(
                "study", f"{unit.study.title} is {unit.study.status}", "trials change only while running or once closed"
            )
        )


def _checked_reason(reason: str) -> str:
    text = reason.strip()
    if not text or len(text) > LONGEST_REASON:
        given = f"{len(text)} characters given" if text else "no reason given"
        raise InputRefused(Fault("reason", given, f"say why, in 1 to {LONGEST_REASON} characters", "reason"))
    return text


def correct_reading(
    database: Database,
    person: Person,
    study_id: int,
    number: int,
    *,
    response: str,
    text: str,
    reason: str,
    now: datetime,
) -> None:
    """Put another reading in place of one that was logged wrong, or add one that was left out."""
    with _on_bench(database, person, study_id, number, reason=reason, now=now) as (bench, why):
        found = _named_response(bench.frame, response)
        place = f"trial {number}, {response}"
        steps = checked_reading(found, text, place=place, field="text")
        if found.anchor is not None and abs(steps - found.anchor) > MAX_DISTANCE:
            raise far_reading(found, steps, anchor=found.anchor, place=place, field="text")
        before = bench.readings.get(found.response_id)
        if before is not None and before.steps == steps:
            raise InputRefused(
                Fault(place, f"it already reads {shown_reading(found, steps)}",
                      "give the right reading", "text")
            )  # fmt: skip
        was = _replace(bench, found, steps)
        bench.unit.record(
            Happening(
                "reading_corrected",
                trial=number,
                response_id=found.response_id,
                before=None if was is None else shown_reading(found, was),
                after=shown_reading(found, steps),
                words=why,
            )
        )


def _replace(bench: _Bench, response: FrameResponse, steps: int) -> int | None:
    """Write the new steps and weigh the change; returns the steps before, None when there were none."""
    session, study_id = bench.unit.session, bench.unit.study.id
    reading = bench.readings.get(response.response_id)
    if reading is None:
        if response.anchor is None:
            set_anchor(session, study_id, response.response_id, anchor=steps)
        # The frame is read again because the anchor may be this very reading.
        fresh = fetch_frame(session, study_id).response_by_id(response.response_id)
        new_reading(session, study_id, bench.trial.number, response.response_id, steps=steps)
        if bench.trial.kept:
            bench.weigh((fresh, steps, +1))
        return None
    was, reading.steps = reading.steps, steps
    if bench.counted(reading):
        bench.weigh((response, was, -1), (response, steps, +1))
    return was


def set_aside_trial(
    database: Database, person: Person, study_id: int, number: int, *, reason: str, now: datetime
) -> None:
    """Keep a trial in the record but leave it out of the tallies."""
    _turn_trial(database, person, study_id, number, keep=False, reason=reason, now=now)


def restore_trial(
    database: Database, person: Person, study_id: int, number: int, *, reason: str, now: datetime
) -> None:
    """Count a trial again that was set aside."""
    _turn_trial(database, person, study_id, number, keep=True, reason=reason, now=now)


def _turn_trial(
    database: Database, person: Person, study_id: int, number: int, *, keep: bool, reason: str, now: datetime
) -> None:
    with _on_bench(database, person, study_id, number, reason=reason, now=now) as (bench, why):
        if bench.trial.kept is keep:
            state = "counted" if keep else "set aside"
            raise NotNow(Fault(f"trial {number}", f"it is {state} already", "nothing needs doing"))
        bench.trial.kept = keep
        bench.weigh(
            *(
                (bench.frame.response_by_id(response_id), reading.steps, +1 if keep else -1)
                for response_id, reading in bench.readings.items()
                if reading.kept
            )
        )
        bench.unit.record(Happening("trial_restored" if keep else "trial_set_aside", trial=number, words=why))


def set_aside_reading(
    database: Database, person: Person, study_id: int, number: int, *, response: str, reason: str, now: datetime
) -> None:
    """Keep one reading of a trial in the record but leave it out of the tallies."""
    _turn_reading(database, person, study_id, number, response=response, keep=False, reason=reason, now=now)


def restore_reading(
    database: Database, person: Person, study_id: int, number: int, *, response: str, reason: str, now: datetime
) -> None:
    """Count a reading again that was set aside."""
    _turn_reading(database, person, study_id, number, response=response, keep=True, reason=reason, now=now)


def _turn_reading(
    database: Database,
    person: Person,
    study_id: int,
    number: int,
    *,
    response: str,
    keep: bool,
    reason: str,
    now: datetime,
) -> None:
    with _on_bench(database, person, study_id, number, reason=reason, now=now) as (bench, why):
        found = _named_response(bench.frame, response)
        reading = bench.reading(found)
        if reading.kept is keep:
            state = "counted" if keep else "set aside"
            raise NotNow(Fault(f"trial {number}, {response}", f"it is {state} already", "nothing needs doing"))
        reading.kept = keep
        if bench.trial.kept:
            bench.weigh((found, reading.steps, +1 if keep else -1))
        text = shown_reading(found, reading.steps)
        bench.unit.record(
            Happening(
                "reading_restored" if keep else "reading_set_aside",
                trial=number,
                response_id=found.response_id,
                before=None if keep else text,
                after=text if keep else None,
                words=why,
            )
        )


def change_step(
    database: Database, person: Person, study_id: int, *, response: str, step: str, reason: str, now: datetime
) -> None:
    """Record a response to a finer step from now on; every earlier reading stays the same number, exactly."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        if unit.study.status not in ("planned", "running"):
            raise NotNow(
                Fault("study", f"{unit.study.title} is {unit.study.status}", "a step changes only while trials come in")
            )
        why = _checked_reason(reason)
        found = _named_response(fetch_frame(unit.session, study_id), response)
        finer = Step.parse(step)
        factor = _times_finer(found, finer)
        _refuse_overflow(unit, found, factor)
        rescale_response(unit.session, study_id, found.response_id, factor=factor)
        if found.anchor is not None:
            set_anchor(unit.session, study_id, found.response_id, anchor=found.anchor * factor)
        set_step(unit.session, study_id, found.response_id, step=str(finer))
        unit.record(
            Happening(
                "step_changed", response_id=found.response_id, before=str(found.step), after=str(finer), words=why
            )
        )


def _times_finer(response: FrameResponse, finer: Step) -> int:
    """Say how many of the new steps make one old step; refuses anything but a whole number above 1."""
    times: Fraction = response.step.fraction / finer.fraction
    if response.kind == "yes_no" or times.denominator != 1 or times <= 1:
        raise InputRefused(
            Fault(
                f"{response.name}, step",
                f"{finer} given",
                f"give a step that {response.step} is a whole multiple of, so that every reading stays exact",
                "step",
            )
        )
    return times.numerator


def _refuse_overflow(unit: StudyUnit, response: FrameResponse, factor: int) -> None:
    span = span_of_readings(unit.session, unit.study.id, response.response_id)
    if span is None or response.anchor is None:
        return
    farthest = max(abs(steps - response.anchor) for steps in span) * factor
    largest = max(abs(steps) for steps in (*span, response.anchor)) * factor
    if farthest > MAX_DISTANCE or largest > FARTHEST_READING:
        raise InputRefused(
            Fault(
                f"{response.name}, step",
                f"readings would lie {farthest} steps from the first one",
                f"at most {MAX_DISTANCE} can be tallied exactly; choose a less fine step",
                "step",
            )
        )
