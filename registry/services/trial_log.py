"""Logging trials as they happen: whole or not at all, and each exactly once."""

from __future__ import annotations

import hashlib
import json
from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from uuid import UUID

from registry.errors import AlreadyThere, Fault, InputRefused, NotNow, ReadingRefused
from registry.services.access import require_study
from registry.services.people import Person
from registry.services.trial_check import (
    EARLIEST_YEAR,
    checked_reading,
    far_reading,
    find_cell,
    placed,
    shown_reading,
    time_faults,
)
from registry.storage.engine import Database
from registry.storage.frame import StudyFrame, fetch_frame
from registry.storage.history import Happening
from registry.storage.runs import find_run
from registry.storage.studies import set_anchor
from registry.storage.tallies import TallyKey, change_tallies
from registry.storage.trials import NewTrial, add_note, add_trials, last_number, trials_by_key
from registry.storage.units import StudyUnit, write_study
from registry.trials.tallies import EMPTY, MAX_DISTANCE, Tally

MOST_AT_ONCE = 1000
LONGEST_NOTE = 2000


@dataclass(frozen=True)
class TrialEntry:
    """One trial as somebody sends it; ``key`` is a UUID made by the sender, so that sending twice logs once.

    ``levels`` are those actually run. A trial that belongs to a ``run`` of the run order
    is counted at the levels that run assigned; where they differ both are kept.
    """

    key: str
    levels: Mapping[str, str]
    readings: Mapping[str, str]
    happened_at: datetime | None
    phone_clock: datetime | None = None
    note: str = ""
    run: int | None = None


@dataclass(frozen=True)
class Logged:
    """What became of one entry; ``created`` is False when the same entry had arrived before."""

    key: str
    number: int
    created: bool


def log_trials(
    database: Database, person: Person, study_id: int, entries: Sequence[TrialEntry], *, now: datetime
) -> tuple[Logged, ...]:
    """Log trials in the order given, whole or refused whole.

    An entry whose key was used before is answered with the trial it made then, also after
    the study has closed; with other content it is refused (AlreadyThere). Raises
    InputRefused with every fault of every entry, NotNow when the study is not running.
    """
    _refuse_bad_list(entries)
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="logger")
        frame = fetch_frame(unit.session, study_id)
        earlier = _earlier(unit, entries)
        fresh = [entry for entry in entries if _key(entry) not in earlier]
        if fresh:
            _require_running(unit)
            start = last_number(unit.session, study_id) + 1
            trials = _checked(frame, fresh, start=start, now=now, alone=len(entries) == 1)
            trials = _assigned(unit, fresh, trials, alone=len(entries) == 1)
            write_trials(unit, frame, trials, person_id=person.id, now=now)
            for trial, entry in zip(trials, fresh, strict=True):
                _record(unit, frame, trial, entry)
            earlier |= {_key(entry): trial.number for trial, entry in zip(trials, fresh, strict=True)}
        made = {_key(entry) for entry in fresh}
        return tuple(Logged(entry.key, earlier[_key(entry)], _key(entry) in made) for entry in entries)


def _refuse_bad_list(entries: Sequence[TrialEntry]) -> None:
    if not 1 <= len(entries) <= MOST_AT_ONCE:
        raise InputRefused(
            Fault("trials", f"{len(entries)} given", f"send 1 to {MOST_AT_ONCE} at once; a longer list is an import")
        )
    faults = []
    seen: set[str] = set()
    for place, entry in enumerate(entries, start=1):
        where = f"trial {place}, key" if len(entries) > 1 else "key"
        try:
            key = _key(entry)
        except ValueError:
            faults.append(Fault(where, f"{entry.key!r} given", "give a UUID", "key"))
            continue
        if key in seen:
            faults.append(Fault(where, f"{entry.key} stands twice in this list", "give each trial its own key", "key"))
        seen.add(key)
    if faults:
        raise InputRefused(faults)


def _key(entry: TrialEntry) -> str:
    return str(UUID(entry.key))


def _earlier(unit: StudyUnit, entries: Sequence[TrialEntry]) -> dict[str, int]:
    """Find the entries that arrived before; refuses a key that comes back with other content."""
    found = trials_by_key(unit.session, unit.study.id, [_key(entry) for entry in entries])
    for entry in entries:
        trial = found.get(_key(entry))
        if trial is not None and trial.content_hash != _content_hash(entry):
            raise AlreadyThere(
                Fault(
                    "key",
                    f"this entry was logged as trial {trial.number} already, with other content",
                    f"log it again if it is another trial, or correct trial {trial.number}",
                    "key",
                )
            )
    return {key: trial.number for key, trial in found.items()}


def _content_hash(entry: TrialEntry) -> str:
    """Hash what was sent, as it was sent: a retry repeats it to the letter."""
    content = [
        sorted((name, level.strip()) for name, level in entry.levels.items()),
        sorted((name, text.strip()) for name, text in entry.readings.items() if text.strip()),
        _stamp(entry.happened_at),
        entry.note.strip(),
        *([entry.run] if entry.run is not None else []),
    ]
    return hashlib.sha256(json.dumps(content, ensure_ascii=True).encode()).hexdigest()


def _stamp(at: datetime | None) -> str | None:
    """Write a time in UTC; one that cannot be told so is refused further on, and written as it is."""
    if at is None or at.tzinfo is None:
        return None
    return at.astimezone(UTC).isoformat() if at.year >= EARLIEST_YEAR else at.isoformat()


def _require_running(unit: StudyUnit) -> None:
    if unit.study.status != "running":
        fix = "start it first" if unit.study.status == "planned" else "log into a study that is running"
        raise NotNow(Fault("study", f"{unit.study.title} is {unit.study.status}", fix))


def _checked(
    frame: StudyFrame, entries: Sequence[TrialEntry], *, start: int, now: datetime, alone: bool
) -> list[NewTrial]:
    trials: list[NewTrial] = []
    faults: list[Fault] = []
    for place, entry in enumerate(entries):
        where = "" if alone else f"trial {place + 1}"
        cell, wrong = find_cell(frame, entry.levels, where=where)
        readings, unread = _readings(frame, entry.readings, where=where)
        wrong += [
            *unread,
            *time_faults(entry.happened_at, now=now, where=where),
            *_note_faults(entry.note, where=where),
        ]
        faults += wrong
        if cell is not None and not wrong:
            trials.append(
                NewTrial(
                    number=start + len(trials),
                    cell=cell,
                    readings=readings,
                    happened_at=entry.happened_at or now,
                    phone_clock=entry.phone_clock,
                    client_key=_key(entry),
                    content_hash=_content_hash(entry),
                )
            )
    if faults:
        raise InputRefused(faults)
    return trials


def _assigned(
    unit: StudyUnit, entries: Sequence[TrialEntry], trials: Sequence[NewTrial], *, alone: bool
) -> list[NewTrial]:
    """Count each trial of a run where the run put it, and mark the run as done."""
    assigned: list[NewTrial] = []
    faults: list[Fault] = []
    for place, (entry, trial) in enumerate(zip(entries, trials, strict=True), start=1):
        if entry.run is None:
            assigned.append(trial)
            continue
        run = find_run(unit.session, unit.study.id, entry.run)
        if run is None or run.state != "waiting":
            given = "there is no such run" if run is None else f"it is {run.state} already"
            where = placed("" if alone else f"trial {place}", f"run {entry.run}")
            faults.append(Fault(where, given, "take the next run that waits, or log without one", "run"))
            continue
        run.state = "done"
        actual = trial.cell if trial.cell != run.cell else None
        assigned.append(replace(trial, cell=run.cell, actual_cell=actual, run_position=run.position))
    if faults:
        raise InputRefused(faults)
    return assigned


def _readings(
    frame: StudyFrame, texts: Mapping[str, str], *, where: str
) -> tuple[tuple[tuple[int, int], ...], list[Fault]]:
    faults = [
        Fault(
            placed(where, name),
            f"this study has no response {name!r}",
            "its responses are " + ", ".join(response.name for response in frame.responses),
            f"readings-{name}",
        )
        for name in texts
        if frame.response(name) is None
    ]
    readings: list[tuple[int, int]] = []
    for response in frame.responses:
        text = texts.get(response.name, "")
        if not text.strip():
            continue
        try:
            steps = checked_reading(
                response, text, place=placed(where, response.name), field=f"readings-{response.name}"
            )
        except ReadingRefused as error:
            faults += error.faults
        else:
            readings.append((response.response_id, steps))
    if not readings and not faults:
        first = frame.responses[0].name
        faults.append(
            Fault(where or "trial", "no reading given", f"give at least one, for example {first}", f"readings-{first}")
        )
    return tuple(readings), faults


def _note_faults(note: str, *, where: str) -> list[Fault]:
    if len(note.strip()) <= LONGEST_NOTE:
        return []
    return [
        Fault(placed(where, "note"), f"{len(note.strip())} characters given", f"give at most {LONGEST_NOTE}", "note")
    ]


def write_trials(
    unit: StudyUnit,
    frame: StudyFrame,
    trials: Sequence[NewTrial],
    *,
    person_id: int,
    now: datetime,
    lines: Sequence[int] = (),
) -> None:
    """Write checked trials and bring the tallies up, in the caller's unit of work.

    Sets the anchor of a response at its first reading. Refuses a reading too far from the
    anchor; ``lines`` tells which line of a file each trial came from, where there is one.
    """
    anchors = {response.response_id: response.anchor for response in frame.responses}
    changes: dict[TallyKey, Tally] = defaultdict(lambda: EMPTY)
    for place, trial in enumerate(trials):
        for response_id, steps in trial.readings:
            anchor = anchors[response_id]
            if anchor is None:
                anchor = anchors[response_id] = steps
                set_anchor(unit.session, unit.study.id, response_id, anchor=steps)
            elif abs(steps - anchor) > MAX_DISTANCE:
                response = frame.response_by_id(response_id)
                where = f"line {lines[place]}" if lines else f"trial {place + 1}" if len(trials) > 1 else ""
                raise far_reading(
                    response,
                    steps,
                    anchor=anchor,
                    place=placed(where, response.name),
                    field=f"readings-{response.name}",
                )
            key = TallyKey(response_id, trial.cell)
            changes[key] = changes[key].add(steps - anchor)
    add_trials(unit.session, unit.study.id, trials, person_id=person_id, logged_at=now)
    change_tallies(unit.session, unit.study.id, changes)


def _record(unit: StudyUnit, frame: StudyFrame, trial: NewTrial, entry: TrialEntry) -> None:
    readings = {
        frame.response_by_id(response_id).name: shown_reading(frame.response_by_id(response_id), steps)
        for response_id, steps in trial.readings
    }
    told: dict[str, object] = {"levels": frame.levels_of(trial.cell), "readings": readings}
    if trial.run_position is not None:
        told["run"] = trial.run_position
    if trial.actual_cell is not None:
        told["as_run"] = frame.levels_of(trial.actual_cell)
    after = json.dumps(told, ensure_ascii=False)
    note = entry.note.strip()
    text = add_note(unit.session, unit.study.id, trial.number, note) if note else None
    unit.record(Happening("trial_logged", trial=trial.number, after=after, text=text))
