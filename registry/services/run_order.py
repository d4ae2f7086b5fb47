"""The run order of a study: what to run next, and what was skipped and why."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from registry.errors import Fault, InputRefused, NotFound, NotNow
from registry.planning.orders import METHOD, complete_sets
from registry.services.access import require_study
from registry.services.people import Person
from registry.services.text_check import checked_text
from registry.storage.engine import Database
from registry.storage.frame import StudyFrame, fetch_frame
from registry.storage.history import Happening
from registry.storage.runs import add_runs, find_run, next_run, runs_by_state, runs_of
from registry.storage.units import StudyUnit, write_study

# A longer order is nothing that people work through run by run.
LONGEST_ORDER = 20_000


@dataclass(frozen=True)
class RunShown:
    """One run: its place in the order, the levels to set, and how it stands."""

    position: int
    levels: Mapping[str, str]
    state: str
    skip_reason: str | None


@dataclass(frozen=True)
class OrderState:
    """How far a run order has been worked through, and the run that comes next; nothing is left when it is None."""

    total: int
    waiting: int
    skipped: int
    following: RunShown | None


def draw_order(unit: StudyUnit, frame: StudyFrame, *, per_cell: int, seed: int) -> None:
    """Draw and keep the order of a study's planned runs, with the seed that draws it again.

    Nothing is drawn where it would be longer than people work through.
    """
    if per_cell * len(frame.cells) > LONGEST_ORDER:
        return
    at_end = frame.block is not None
    blocks: dict[int | None, list[int]] = {}
    for ranks, cell in sorted(frame.cells.items(), key=lambda each: each[1]):
        blocks.setdefault(ranks[-1] if at_end else None, []).append(cell)
    block_of = {cell: block for block, cells in blocks.items() for cell in cells}
    order = complete_sets(list(blocks.values()), per_cell=per_cell, seed=seed)
    add_runs(unit.session, unit.study.id, [(cell, block_of[cell]) for cell in order])
    drawn = {"runs": len(order), "seed": seed, "method": METHOD}
    unit.record(Happening("run_order_drawn", after=json.dumps(drawn)))


def order_state(session: Any, frame: StudyFrame, *, block: str | None = None) -> OrderState | None:
    """Say how a study's run order stands, inside an open read; None when none was drawn.

    ``block`` asks for the next run of one block.
    """
    counts = runs_by_state(session, frame.study_id)
    if not counts:
        return None
    rank = frame.block.known_as.get(block) if frame.block and block else None
    found = next_run(session, frame.study_id, block=rank)
    following = _shown(frame, found) if found is not None else None
    return OrderState(sum(counts.values()), counts.get("waiting", 0), counts.get("skipped", 0), following)


def run_list(database: Database, person: Person, study_id: int) -> tuple[RunShown, ...]:
    """List every run of a study in order."""
    with database.read() as session:
        require_study(session, person, study_id, at_least="viewer")
        frame = fetch_frame(session, study_id)
        return tuple(_shown(frame, run) for run in runs_of(session, study_id))


def _shown(frame: StudyFrame, run: Any) -> RunShown:
    return RunShown(run.position, frame.levels_of(run.cell), run.state, run.skip_reason)


def skip_run(database: Database, person: Person, study_id: int, position: int, *, reason: str, now: datetime) -> None:
    """Leave a run out for a stated reason; it stays in the order as skipped."""
    faults: list[Fault] = []
    words = checked_text(reason, where="reason", field="skip_reason", faults=faults, needed=True)
    if faults:
        raise InputRefused(faults)
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="logger")
        if unit.study.status != "running":
            raise NotNow(Fault("study", f"{unit.study.title} is {unit.study.status}", "runs are skipped while it runs"))
        run = find_run(unit.session, study_id, position)
        if run is None:
            raise NotFound(Fault("run", f"{unit.study.title} has no run {position}", "choose one of its run order"))
        if run.state != "waiting":
            raise NotNow(Fault("run", f"run {position} is {run.state} already", "skip one that waits"))
        run.state, run.skip_reason = "skipped", words
        unit.record(Happening("run_skipped", after=str(position), words=words))
