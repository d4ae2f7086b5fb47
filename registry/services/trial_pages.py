"""What pages show of trials: the sheet to log on, the list, and one trial with its history."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Literal

from registry.errors import Fault, NotFound
from registry.services.history import EventShown, events_of_trial
from registry.services.people import Person
from registry.services.run_order import OrderState, order_state
from registry.services.study_card import StudyCard, open_study_card
from registry.services.trial_check import shown_reading
from registry.storage.engine import Database
from registry.storage.frame import StudyFrame, fetch_frame
from registry.storage.tables import Reading, Trial
from registry.storage.trials import (
    count_trials,
    counts_by_cell,
    find_trial,
    name_of_logger,
    newest_trials,
    notes_of,
    readings_of,
)

Which = Literal["all", "kept", "set_aside"]
RECENT = 5


@dataclass(frozen=True)
class ReadingShown:
    """One reading as people read it."""

    response: str
    text: str
    kept: bool


@dataclass(frozen=True)
class TrialShown:
    """One trial as people read it; ``levels`` hold the block's too, ``as_run`` what was run where it differs."""

    number: int
    levels: Mapping[str, str]
    readings: tuple[ReadingShown, ...]
    happened_at: datetime
    logged_at: datetime
    person: str
    kept: bool
    note: str
    run: int | None
    as_run: Mapping[str, str] | None


@dataclass(frozen=True)
class TrialList:
    """One page of a study's trials, the newest first."""

    card: StudyCard
    trials: tuple[TrialShown, ...]
    which: Which
    page: int
    pages: int
    total: int


@dataclass(frozen=True)
class TrialDetail:
    """One trial with everything that happened to it, the newest first."""

    card: StudyCard
    trial: TrialShown
    history: tuple[EventShown, ...]


@dataclass(frozen=True)
class CellCount:
    """How often one combination was run; ``levels`` in the order of the study's factors, the block last."""

    levels: tuple[str, ...]
    count: int


@dataclass(frozen=True)
class LogSheet:
    """What somebody needs at the work place: the combinations, how often each was run, the last few trials."""

    card: StudyCard
    cells: tuple[CellCount, ...]
    recent: tuple[TrialShown, ...]
    order: OrderState | None


def trial_list(
    database: Database, person: Person, study_id: int, *, page: int = 1, per_page: int = 50, which: Which = "all"
) -> TrialList:
    """Show one page of a study's trials."""
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        total = count_trials(session, study_id, which=which)
        pages = max(1, -(-total // per_page))
        page = min(max(1, page), pages)
        rows = newest_trials(session, study_id, which=which, limit=per_page, offset=(page - 1) * per_page)
        frame = fetch_frame(session, study_id)
        numbers = [trial.number for trial, _ in rows]
        readings = readings_of(session, study_id, numbers)
        notes = notes_of(session, study_id, numbers)
        shown = _shown_all(frame, rows, readings, notes)
    return TrialList(card, shown, which, page, pages, total)


def _shown_all(
    frame: StudyFrame,
    rows: Sequence[tuple[Trial, str]],
    readings: Mapping[int, Sequence[Reading]],
    notes: Mapping[int, str],
) -> tuple[TrialShown, ...]:
    return tuple(
        _shown(frame, trial, name, readings[trial.number], note=notes.get(trial.number, "")) for trial, name in rows
    )


def _shown(frame: StudyFrame, trial: Trial, name: str, readings: Sequence[Reading], *, note: str) -> TrialShown:
    by_id = {reading.response_id: reading for reading in readings}
    return TrialShown(
        number=trial.number,
        levels=frame.levels_of(trial.cell),
        readings=tuple(
            ReadingShown(response.name, shown_reading(response, reading.steps), reading.kept)
            for response in frame.responses
            if (reading := by_id.get(response.response_id)) is not None
        ),
        happened_at=trial.happened_at or trial.logged_at,
        logged_at=trial.logged_at,
        person=name,
        kept=trial.kept,
        note=note,
        run=trial.run_position,
        as_run=frame.levels_of(trial.actual_cell) if trial.actual_cell is not None else None,
    )


def trial_detail(database: Database, person: Person, study_id: int, number: int) -> TrialDetail:
    """Show one trial with its history."""
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        trial = find_trial(session, study_id, number)
        if trial is None:
            raise NotFound(Fault("trial", f"{card.title} has no trial {number}", "choose one from its trials"))
        shown = _shown(
            fetch_frame(session, study_id),
            trial,
            name_of_logger(session, trial),
            readings_of(session, study_id, [number])[number],
            note=notes_of(session, study_id, [number]).get(number, ""),
        )
        return TrialDetail(card, shown, events_of_trial(session, study_id, number))


def log_sheet(database: Database, person: Person, study_id: int, *, block: str | None = None) -> LogSheet:
    """Show what to log on: the next run, every combination with its count, and the last few trials.

    ``block`` asks for the next run of one block, as the shift at work.
    """
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        frame = fetch_frame(session, study_id)
        counts = counts_by_cell(session, study_id)
        cells = tuple(
            CellCount(tuple(frame.levels_of(cell).values()), counts.get(cell, 0)) for cell in sorted(frame.ranks)
        )
        rows = newest_trials(session, study_id, which="all", limit=RECENT, offset=0)
        numbers = [trial.number for trial, _ in rows]
        recent = _shown_all(frame, rows, readings_of(session, study_id, numbers), notes_of(session, study_id, numbers))
        order = order_state(session, frame, block=block)
    return LogSheet(card, cells, recent, order)
