"""Trials and readings: written in bulk, found again, and changed one at a time."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import Select, func, or_, select
from sqlalchemy.orm import Session

from registry.storage.history import keep_texts
from registry.storage.tables import FreeText, Person, Reading, Trial, TrialNote


@dataclass(frozen=True, slots=True)
class NewTrial:
    """A trial about to be written, with its readings as (response, steps)."""

    number: int
    cell: int
    readings: tuple[tuple[int, int], ...]
    happened_at: datetime | None
    phone_clock: datetime | None = None
    client_key: str | None = None
    content_hash: str | None = None
    actual_cell: int | None = None
    run_position: int | None = None


_TRIAL_COLUMNS = (
    "study_id", "number", "cell", "happened_at", "phone_clock", "logged_at", "person_id", "client_key",
    "content_hash", "kept", "actual_cell", "run_position",
)  # fmt: skip
_READING_COLUMNS = ("study_id", "trial", "response_id", "steps", "kept")


def add_trials(
    session: Session, study_id: int, trials: Sequence[NewTrial], *, person_id: int, logged_at: datetime
) -> None:
    """Write trials and their readings by the driver's own bulk path: one statement a table, or COPY."""
    rows = (
        (study_id, trial.number, trial.cell, trial.happened_at, trial.phone_clock, logged_at, person_id,
         trial.client_key, trial.content_hash, True, trial.actual_cell, trial.run_position)
        for trial in trials
    )  # fmt: skip
    _load(session, "trial", _TRIAL_COLUMNS, rows)
    readings = (
        (study_id, trial.number, response_id, steps, True) for trial in trials for response_id, steps in trial.readings
    )
    _load(session, "reading", _READING_COLUMNS, readings)


def _load(session: Session, table: str, columns: tuple[str, ...], rows: Iterable[tuple[Any, ...]]) -> None:
    """Load rows past the statement builder; names are our own constants, values are always bound."""
    session.flush()
    driver: Any = session.connection().connection.driver_connection
    names = ", ".join(columns)
    cursor = driver.cursor()
    try:
        if session.get_bind().dialect.name == "postgresql":
            with cursor.copy(f"COPY {table} ({names}) FROM STDIN") as copy:
                for row in rows:
                    copy.write_row(row)
        else:
            marks = ", ".join("?" * len(columns))
            cursor.executemany(f"INSERT INTO {table} ({names}) VALUES ({marks})", _for_sqlite(rows))
    finally:
        cursor.close()


def _for_sqlite(rows: Iterable[tuple[Any, ...]]) -> Iterator[tuple[Any, ...]]:
    """Write moments as the SQLite dialect does, since the driver is called directly here."""
    for row in rows:
        yield tuple(
            value.astimezone(UTC).strftime("%Y-%m-%d %H:%M:%S.%f") if isinstance(value, datetime) else value
            for value in row
        )


def last_number(session: Session, study_id: int) -> int:
    """Give the number of the last trial of a study; 0 before the first."""
    return session.scalar(select(func.max(Trial.number)).where(Trial.study_id == study_id)) or 0


def trials_by_key(session: Session, study_id: int, keys: Sequence[str]) -> dict[str, Trial]:
    """Find the trials that were sent under the given client keys."""
    found = session.scalars(select(Trial).where(Trial.study_id == study_id, Trial.client_key.in_(keys)))
    return {trial.client_key: trial for trial in found if trial.client_key is not None}


def find_trial(session: Session, study_id: int, number: int) -> Trial | None:
    """Find one trial of a study by its number."""
    return session.get(Trial, (study_id, number))


def readings_of(session: Session, study_id: int, numbers: Sequence[int]) -> dict[int, list[Reading]]:
    """Give the readings of some trials, by trial number."""
    found: dict[int, list[Reading]] = {number: [] for number in numbers}
    rows = session.scalars(select(Reading).where(Reading.study_id == study_id, Reading.trial.in_(numbers)))
    for reading in rows:
        found[reading.trial].append(reading)
    return found


def notes_of(session: Session, study_id: int, numbers: Sequence[int]) -> dict[int, str]:
    """Give the note of some trials, by trial number; an erased note says so."""
    rows = session.execute(
        select(TrialNote.trial, FreeText.body)
        .join(
            FreeText,
            (FreeText.study_id == TrialNote.study_id) & (FreeText.number == TrialNote.text_number),
        )
        .where(TrialNote.study_id == study_id, TrialNote.trial.in_(numbers))
        .order_by(TrialNote.text_number)
    )
    notes: dict[int, str] = {}
    for number, body in rows:
        text = "(erased)" if body is None else body
        notes[number] = f"{notes[number]}\n{text}" if number in notes else text
    return notes


def _chosen(study_id: int, which: str) -> Select[Trial]:
    statement = select(Trial).where(Trial.study_id == study_id)
    aside = (
        select(Reading.trial)
        .where(Reading.study_id == study_id, Reading.trial == Trial.number, Reading.kept.is_(False))
        .exists()
    )
    if which == "kept":
        return statement.where(Trial.kept, ~aside)
    if which == "set_aside":
        return statement.where(or_(Trial.kept.is_(False), aside))
    return statement


def count_trials(session: Session, study_id: int, *, which: str) -> int:
    """Count the trials of a study: all, kept whole, or with anything set aside."""
    return session.scalar(select(func.count()).select_from(_chosen(study_id, which).subquery())) or 0


def newest_trials(session: Session, study_id: int, *, which: str, limit: int, offset: int) -> list[tuple[Trial, str]]:
    """Give trials, the newest first, each with the name of the person who logged it."""
    trials = _chosen(study_id, which).order_by(Trial.number.desc()).limit(limit).offset(offset).subquery()
    rows = session.execute(
        select(Trial, Person.name)
        .join(trials, (trials.c.study_id == Trial.study_id) & (trials.c.number == Trial.number))
        .join(Person, Person.id == Trial.person_id)
        .order_by(Trial.number.desc())
    )
    return [(row[0], row[1]) for row in rows]


def counts_by_cell(session: Session, study_id: int) -> dict[int, int]:
    """Count the kept trials of every cell as assigned."""
    rows = session.execute(
        select(Trial.cell, func.count()).where(Trial.study_id == study_id, Trial.kept).group_by(Trial.cell)
    )
    return {cell: int(count) for cell, count in rows}


def add_note(session: Session, study_id: int, number: int, body: str) -> FreeText:
    """Set a note beside a trial; returns its text, which stands where it can be erased."""
    return add_notes(session, study_id, [(number, body)])[0]


def new_reading(session: Session, study_id: int, number: int, response_id: int, *, steps: int) -> None:
    """Add a reading that a trial was logged without."""
    session.add(Reading(study_id=study_id, trial=number, response_id=response_id, steps=steps, kept=True))


def name_of_logger(session: Session, trial: Trial) -> str:
    """Name the person who logged a trial."""
    return session.scalars(select(Person.name).where(Person.id == trial.person_id)).one()


def add_notes(session: Session, study_id: int, notes: Sequence[tuple[int, str]]) -> list[FreeText]:
    """Set notes beside their trials; returns their texts, which stand where they can be erased."""
    texts = keep_texts(session, study_id, [body for _, body in notes])
    session.add_all(
        TrialNote(study_id=study_id, trial=number, text_number=text.number)
        for (number, _), text in zip(notes, texts, strict=True)
    )
    return texts
