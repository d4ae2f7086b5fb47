"""Importing a file of trials: given, looked at, and taken in whole or not at all."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import get_args
from zoneinfo import ZoneInfo

from registry.errors import AlreadyThere, Fault, InputRefused, NotFound, NotNow
from registry.exchange.uploads import UploadedTable, read_uploaded
from registry.services.access import require_study
from registry.services.import_check import (
    CheckedRow,
    CheckedTable,
    ColumnChoice,
    ColumnKind,
    Offer,
    check_rows,
    choice_faults,
    guessed_choices,
)
from registry.services.people import Person
from registry.services.study_card import StudyCard, open_study_card
from registry.services.trial_log import write_trials
from registry.storage.engine import Database
from registry.storage.frame import StudyFrame, fetch_frame
from registry.storage.history import Happening, salted
from registry.storage.imports import (
    earlier_import,
    find_upload,
    keep_upload,
    remember_choices,
    remembered_choices,
)
from registry.storage.tables import ImportJob
from registry.storage.trials import NewTrial, add_notes, last_number
from registry.storage.units import StudyUnit, write_study

SAMPLE_ROWS = 8
FAULTS_SHOWN = 200
COLUMN_KINDS: tuple[ColumnKind, ...] = get_args(ColumnKind)


@dataclass(frozen=True)
class Preview:
    """What a file would bring, before anything is written; ``ready`` when it can be taken in as chosen."""

    card: StudyCard
    job: int
    name: str
    columns: tuple[str, ...]
    choices: tuple[ColumnChoice, ...]
    rows: int
    sample: tuple[tuple[str, ...], ...]
    faults: tuple[Fault, ...]
    fault_count: int
    offers: tuple[Offer, ...]
    offer_count: int
    left_out: tuple[int, ...]
    earlier: str | None
    ready: bool


@dataclass(frozen=True)
class Imported:
    """What an import wrote: how many trials, from which number to which."""

    rows: int
    first: int
    last: int


def read_upload(database: Database, person: Person, study_id: int, *, name: str, content: bytes, now: datetime) -> int:
    """Keep a file for import, once it can be read as a table; returns the number of its job."""
    with database.read() as session:
        require_study(session, person, study_id, at_least="analyst")  # A stranger's file is not even opened.
    read_uploaded(name or "file", content)
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_running(unit)
        job = keep_upload(
            unit.session, study_id, name=name[:200] or "file", content=content, person_id=person.id, now=now
        )
        return job.number


def _require_running(unit: StudyUnit) -> None:
    if unit.study.status != "running":
        fix = "start it first" if unit.study.status == "planned" else "import into a study that is running"
        raise NotNow(Fault("study", f"{unit.study.title} is {unit.study.status}", fix))


def preview(
    database: Database,
    person: Person,
    study_id: int,
    job: int,
    *,
    choices: Sequence[ColumnChoice] | None,
    now: datetime,
) -> Preview:
    """Look at a kept file as it would be taken in; without choices they are remembered or guessed."""
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        require_study(session, person, study_id, at_least="analyst")
        kept = _waiting(find_upload(session, study_id, job), job)
        frame = fetch_frame(session, study_id)
        table = read_uploaded(kept.name, kept.content or b"")
        if choices is None:
            remembered = remembered_choices(session, card.series_id, table.columns)
            choices = _revived(remembered, frame, table.columns)
        twin = earlier_import(session, study_id, kept.digest)
        earlier = f"trials {twin.first_trial} to {twin.last_trial}" if twin else None
        return _previewed(card, kept, frame, table, tuple(choices), earlier=earlier, now=now)


def _waiting(kept: ImportJob | None, job: int) -> ImportJob:
    if kept is None:
        raise NotFound(Fault("import", f"there is no file {job}", "give the file again"))
    if kept.state != "waiting":
        raise NotNow(Fault("import", f"{kept.name} is {kept.state} already", "give the file again to import it anew"))
    return kept


def _revived(remembered: list[list[str]] | None, frame: StudyFrame, columns: Sequence[str]) -> tuple[ColumnChoice, ...]:
    """Use what these heads meant last time, if it still fits this study; else guess."""
    if remembered is not None:
        kinds: dict[str, ColumnKind] = {kind: kind for kind in COLUMN_KINDS}
        choices = tuple(ColumnChoice(kinds[kind], target) for kind, target in remembered if kind in kinds)
        if not choice_faults(frame, columns, choices):
            return choices
    return guessed_choices(frame, columns)


def _previewed(
    card: StudyCard,
    kept: ImportJob,
    frame: StudyFrame,
    table: UploadedTable,
    choices: tuple[ColumnChoice, ...],
    *,
    earlier: str | None,
    now: datetime,
) -> Preview:
    faults = choice_faults(frame, table.columns, choices)
    checked = CheckedTable((), tuple(faults), (), ())
    if not faults:
        checked = check_rows(frame, table, choices, zone=ZoneInfo(card.time_zone), now=now, rounding=True)
    return Preview(
        card=card,
        job=kept.number,
        name=kept.name,
        columns=table.columns,
        choices=choices,
        rows=len(table.rows),
        sample=tuple(row.values for row in table.rows[:SAMPLE_ROWS]),
        faults=checked.faults[:FAULTS_SHOWN],
        fault_count=len(checked.faults),
        offers=checked.offers[:FAULTS_SHOWN],
        offer_count=len(checked.offers),
        left_out=checked.left_out,
        earlier=earlier,
        ready=not checked.faults and bool(checked.rows),
    )


def run_import(
    database: Database,
    person: Person,
    study_id: int,
    job: int,
    *,
    choices: Sequence[ColumnChoice],
    round_offered: bool,
    again: bool = False,
    now: datetime,
) -> Imported:
    """Take a kept file in: every row, or none and every fault.

    ``round_offered`` says that readings between two steps may be taken to the nearest
    one; ``again`` that the very same file may be taken in a second time.
    """
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_running(unit)
        kept = _waiting(find_upload(unit.session, study_id, job), job)
        _refuse_twin(unit, kept, again=again)
        frame = fetch_frame(unit.session, study_id)
        table = read_uploaded(kept.name, kept.content or b"")
        rows = _rows_or_faults(unit, frame, table, choices, round_offered=round_offered, now=now)
        imported = _take_in(unit, frame, kept, rows, person_id=person.id, now=now)
        remember_choices(
            unit.session,
            unit.study.series_id,
            table.columns,
            [[choice.kind, choice.target] for choice in choices],
            now=now,
        )
        return imported


def _refuse_twin(unit: StudyUnit, kept: ImportJob, *, again: bool) -> None:
    twin = earlier_import(unit.session, unit.study.id, kept.digest)
    if twin is not None and not again:
        raise AlreadyThere(
            Fault(
                kept.name,
                f"the very same file is in this study as trials {twin.first_trial} to {twin.last_trial}",
                "tick that it is to be taken in again, or give another file",
                "again",
            )
        )


def _rows_or_faults(
    unit: StudyUnit,
    frame: StudyFrame,
    table: UploadedTable,
    choices: Sequence[ColumnChoice],
    *,
    round_offered: bool,
    now: datetime,
) -> tuple[CheckedRow, ...]:
    faults = choice_faults(frame, table.columns, choices)
    if faults:
        raise InputRefused(faults)
    zone = ZoneInfo(unit.study.time_zone)
    checked = check_rows(frame, table, choices, zone=zone, now=now, rounding=round_offered)
    faults = list(checked.faults)
    if not round_offered:
        faults += [
            Fault(f"line {offer.line}, column {offer.column}", f"{offer.given} lies between two steps",
                  f"agree to round it to {offer.offered}, or give the study a finer step", "round_offered")
            for offer in checked.offers
        ]  # fmt: skip
    if not checked.rows and not faults:
        faults.append(Fault("file", "no row has a reading", "choose the columns that hold readings"))
    if faults:
        raise InputRefused(faults)
    return checked.rows


def _take_in(
    unit: StudyUnit,
    frame: StudyFrame,
    kept: ImportJob,
    rows: Sequence[CheckedRow],
    *,
    person_id: int,
    now: datetime,
) -> Imported:
    first = last_number(unit.session, unit.study.id) + 1
    trials = [
        NewTrial(number=first + place, cell=row.cell, readings=row.readings, happened_at=row.happened_at)
        for place, row in enumerate(rows)
    ]
    last = trials[-1].number
    write_trials(unit, frame, trials, person_id=person_id, now=now, lines=[row.line for row in rows])
    notes = add_notes(
        unit.session,
        unit.study.id,
        [(trial.number, row.note) for trial, row in zip(trials, rows, strict=True) if row.note],
    )
    after = {
        "rows": len(rows),
        "first": first,
        "last": last,
        "digest": _digest(trials, [salted(note) for note in notes]),
    }
    unit.record(Happening("trials_imported", after=json.dumps(after), words=kept.name))
    kept.state, kept.ended_at, kept.first_trial, kept.last_trial = "done", now, first, last
    kept.content = None  # The rows are in the record now; the file's digest stays.
    return Imported(len(rows), first, last)


def _digest(trials: Sequence[NewTrial], salted_notes: Sequence[str]) -> str:
    """Hash what an import wrote; notes enter by their salted hash, so that they can be erased later."""
    digest = hashlib.sha256()
    for trial in trials:
        moment = trial.happened_at.isoformat() if trial.happened_at else None
        digest.update(json.dumps([trial.number, trial.cell, trial.readings, moment]).encode())
    for note in salted_notes:
        digest.update(note.encode())
    return digest.hexdigest()


def drop_upload(database: Database, person: Person, study_id: int, job: int, *, now: datetime) -> None:
    """Drop a kept file that is not wanted after all."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        kept = _waiting(find_upload(unit.session, study_id, job), job)
        kept.state, kept.ended_at, kept.content = "dropped", now, None
