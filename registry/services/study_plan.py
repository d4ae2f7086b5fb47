"""A study's way: its plan locked, started, closed or withdrawn."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime

from registry.errors import AlreadyThere, Fault, InputRefused, NotNow
from registry.services.access import require_study
from registry.services.people import Person
from registry.services.pinning import pin_result
from registry.services.run_order import draw_order
from registry.services.text_check import checked_margin, checked_text
from registry.storage.engine import Database
from registry.storage.frame import StudyFrame, fetch_frame
from registry.storage.history import Happening
from registry.storage.studies import TrialCount, add_plan, plans_of, set_margin, trial_counts
from registry.storage.tables import Plan
from registry.storage.trials import counts_by_cell
from registry.storage.units import StudyUnit, write_study

MOST_PER_CELL = 1_000_000
ALPHA = "0.05"
# Tuning of the anytime interval: effect variance as a multiple of the contrast's planned
# variance, best at the planned end (Lindon, Ham, Tingley & Bojinov, arXiv 2210.08589;
# -W₋₁(-α²/e) - 1 at α = 0.05). Kept with every plan, because a study may close early.
TUNING = "8.212"
SPREADS = ("shared", "own")
LOOKS = ("closed", "as_you_go")
CLOSE_REASONS = ("size_reached", "early", "extended")


@dataclass(frozen=True)
class PlanDraft:
    """A plan about to be locked; numbers as typed, ``spread`` empty for the house rule."""

    per_cell: str
    spread: str = ""
    looks: str = "closed"
    margins: Mapping[str, str] = field(default_factory=dict)


def lock_plan(
    database: Database, person: Person, study_id: int, draft: PlanDraft, *, now: datetime, seed: int | None = None
) -> None:
    """Promise the size, the margins and the spread policy before the first trial.

    A ``seed`` draws the run order; without one trials are logged as they come.
    """
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        if plans_of(unit.session, [study_id]):
            raise AlreadyThere(Fault("plan", "it is locked already", "later changes are amendments"))
        _require_status(unit, ("planned",), "a plan is locked before the study starts")
        frame = fetch_frame(unit.session, study_id)
        per_cell, margins = _checked_plan(frame, draft)
        spread = draft.spread or ("own" if per_cell >= 5 and frame.block is None else "shared")
        for name, margin in margins.items():
            response = frame.response(name)
            if response is not None:
                set_margin(unit.session, study_id, response.response_id, margin=margin)
        unit.study.spread = spread
        planned = per_cell * len(frame.cells)
        add_plan(
            unit.session,
            {
                "study_id": study_id, "per_cell": per_cell, "planned": planned, "alpha": ALPHA, "looks": draft.looks,
                "tau_squared": TUNING, "planning_variance": None, "comparisons": [], "trials_a_week": None,
                "locked_at": now, "locked_by": person.id,
            },
        )  # fmt: skip
        after = {"per_cell": per_cell, "planned": planned, "spread": spread, "looks": draft.looks, "margins": margins}
        unit.record(Happening("plan_locked", after=json.dumps(after, ensure_ascii=False)))
        if seed is not None:
            draw_order(unit, frame, per_cell=per_cell, seed=seed)


def _checked_plan(frame: StudyFrame, draft: PlanDraft) -> tuple[int, dict[str, str | None]]:
    faults: list[Fault] = []
    text = draft.per_cell.strip()
    per_cell = int(text) if text.isascii() and text.isdigit() and len(text) < 10 else 0
    if not 1 <= per_cell <= MOST_PER_CELL:
        faults.append(
            Fault(
                "trials a combination", f"{text!r} given", f"give a whole number from 1 to {MOST_PER_CELL}", "per_cell"
            )
        )
    if draft.spread not in ("", *SPREADS):
        faults.append(Fault("spread", f"{draft.spread!r} given", "choose shared or own", "spread"))
    if draft.spread == "own" and frame.block is not None:
        faults.append(
            Fault("spread", "own given", "with a block the spread is shared: it is the residual of the block model",
                  "spread")
        )  # fmt: skip
    if draft.looks not in LOOKS:
        faults.append(Fault("looks", f"{draft.looks!r} given", "choose closed or as you go", "looks"))
    margins: dict[str, str | None] = {}
    for name, text in draft.margins.items():
        if frame.response(name) is None:
            faults.append(Fault("margin", f"this study has no response {name!r}", "give margins of its own responses"))
        else:
            margins[name] = checked_margin(text, where=f"{name}, margin", field=f"margins-{name}", faults=faults)
    if faults:
        raise InputRefused(faults)
    return per_cell, margins


def _require_status(unit: StudyUnit, statuses: tuple[str, ...], accepted: str) -> None:
    if unit.study.status not in statuses:
        raise NotNow(Fault("study", f"{unit.study.title} is {unit.study.status}", accepted))


def start_study(database: Database, person: Person, study_id: int, *, now: datetime) -> None:
    """Let trials come in; without a locked plan the study is exploratory."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_status(unit, ("planned",), "only a planned study can start")
        unit.study.status, unit.study.started_at = "running", now
        unit.record(Happening("study_started"))


def close_study(database: Database, person: Person, study_id: int, *, reason: str, note: str, now: datetime) -> None:
    """End a running study for a stated reason; early and extended need a note."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_status(unit, ("running",), "only a running study can be closed")
        words = _checked_closing(unit, reason, note)
        unit.study.status, unit.study.close_reason, unit.study.closed_at = "closed", reason, now
        unit.study.close_note = words or None
        unit.record(Happening("study_closed", after=reason, words=words or None))
        pin_result(unit, now=now)


def _checked_closing(unit: StudyUnit, reason: str, note: str) -> str:
    faults: list[Fault] = []
    if reason not in CLOSE_REASONS:
        faults.append(
            Fault(
                "reason", f"{reason!r} given", "choose size reached, early or extended, or give the study up", "reason"
            )
        )
    words = checked_text(note, where="note", field="note", faults=faults, needed=reason in ("early", "extended"))
    plan = plans_of(unit.session, [unit.study.id]).get(unit.study.id)
    count = trial_counts(unit.session, [unit.study.id]).get(unit.study.id, TrialCount())
    kept = count.logged - count.set_aside
    if reason == "size_reached" and plan is None:
        faults.append(Fault("reason", "no size was planned", "close it as early or extended", "reason"))
    elif reason == "size_reached" and plan is not None:
        faults += _size_faults(unit, plan, kept=kept)
    if faults:
        raise InputRefused(faults)
    return words


def _size_faults(unit: StudyUnit, plan: Plan, *, kept: int) -> Iterator[Fault]:
    """Refuse a size as reached while any combination has fewer trials than were promised of each."""
    counts = counts_by_cell(unit.session, unit.study.id)
    frame = fetch_frame(unit.session, unit.study.id)
    missing = sum(max(0, plan.per_cell - counts.get(cell, 0)) for cell in frame.ranks)
    if kept < plan.planned:
        given = f"{kept} of {plan.planned} planned trials count"
    else:
        least = min(frame.ranks, key=lambda cell: counts.get(cell, 0))
        levels = ", ".join(frame.levels_of(least).values())
        given = f"{levels} has {counts.get(least, 0)} of the {plan.per_cell} trials planned of each combination"
    if missing:
        yield Fault("reason", given, f"log {missing} more where they are missing, or close it as early", "reason")


def withdraw_study(database: Database, person: Person, study_id: int, *, note: str, now: datetime) -> None:
    """Give a study up; its trials stay in the record and count for nothing."""
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        _require_status(unit, ("planned", "running"), "only a planned or running study can be withdrawn")
        faults: list[Fault] = []
        words = checked_text(note, where="note", field="note", faults=faults, needed=True)
        if faults:
            raise InputRefused(faults)
        unit.study.status = "withdrawn"
        unit.record(Happening("study_withdrawn", words=words))
