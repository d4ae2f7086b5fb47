"""What happened to a study, in sentences, the newest first."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import datetime
from typing import TYPE_CHECKING, Any

from registry.services.people import Person
from registry.storage.engine import Database
from registry.storage.history import EventRow, count_events, newest_events

if TYPE_CHECKING:
    from registry.services.study_card import StudyCard

PER_PAGE = 50


@dataclass(frozen=True)
class EventShown:
    """One event as people read it; ``what`` is its code, ``reason`` the words given with it."""

    number: int
    at: datetime
    person: str
    what: str
    words: str
    before: str | None
    after: str | None
    reason: str | None


@dataclass(frozen=True)
class HistoryPage:
    """One page of a study's history."""

    card: StudyCard
    events: tuple[EventShown, ...]
    page: int
    pages: int


def study_history(database: Database, person: Person, study_id: int, *, page: int = 1) -> HistoryPage:
    """Show one page of what happened to a study."""
    from registry.services.study_card import open_study_card

    with database.read() as session:
        card = open_study_card(session, person, study_id)
        pages = max(1, -(-count_events(session, study_id) // PER_PAGE))
        page = min(max(1, page), pages)
        rows = newest_events(session, study_id, trial=None, limit=PER_PAGE, offset=(page - 1) * PER_PAGE)
        return HistoryPage(card, tuple(_shown(row) for row in rows), page, pages)


def events_of_trial(session: Any, study_id: int, number: int) -> tuple[EventShown, ...]:
    """Give what happened to one trial, the newest first."""
    rows = newest_events(session, study_id, trial=number, limit=1000, offset=0)
    return tuple(_shown(row) for row in rows)


def _shown(row: EventRow) -> EventShown:
    return EventShown(row.number, row.at, row.person, row.what, _sentence(row), row.before, row.after, row.words)


def _sentence(row: EventRow) -> str:
    """Say an event in words; what is quoted was typed by people and is escaped where it is shown."""
    trial, response = f"Trial {row.trial}", row.response
    match row.what:
        case "trial_logged":
            content = json.loads(row.after or "{}")
            levels = ", ".join(str(level) for level in content.get("levels", {}).values())
            readings = ", ".join(f"{name} {text}" for name, text in content.get("readings", {}).items())
            run = f" (run {content['run']})" if "run" in content else ""
            as_run = ", ".join(str(level) for level in content.get("as_run", {}).values())
            return f"{trial} logged{run}: {levels}: {readings}" + (f"; actually run: {as_run}" if as_run else "")
        case "trials_imported":
            content = json.loads(row.after or "{}")
            return f"Trials {content.get('first')} to {content.get('last')} imported"
        case "reading_corrected" | "reading_set_aside" | "reading_restored":
            return f"{trial}: {response} {_of_reading(row)}"
        case "plan_locked":
            plan = json.loads(row.after or "{}")
            return f"Plan locked: {plan.get('per_cell')} trials a combination, {plan.get('planned')} in all"
        case "run_order_drawn":
            order = json.loads(row.after or "{}")
            return f"Run order of {order.get('runs')} runs drawn from seed {order.get('seed')}"
        case "level_renamed":
            before, after = json.loads(row.before or "{}"), json.loads(row.after or "{}")
            return f"{before.get('factor')}: {before.get('level')} is called {after.get('level')} from now on"
        case "study_closed":
            return f"Study closed: {(row.after or '').replace('_', ' ')}"
        case _:
            return _PLAIN[row.what].format(trial=trial, response=response, before=row.before, after=row.after)


def _of_reading(row: EventRow) -> str:
    match row.what:
        case "reading_corrected" if row.before is None:
            return f"added, {row.after}"
        case "reading_corrected":
            return f"corrected from {row.before} to {row.after}"
        case "reading_set_aside":
            return f"{row.before} set aside"
        case _:
            return f"{row.after} restored"


_PLAIN = {
    "study_made": "Study made",
    "study_started": "Study started",
    "study_withdrawn": "Study withdrawn",
    "trial_set_aside": "{trial} set aside",
    "trial_restored": "{trial} restored",
    "step_changed": "Step of {response} changed from {before} to {after}",
    "run_skipped": "Run {after} skipped",
    "decision_made": "Decision {after} set down",
    "decision_reviewed": "Decision {before} looked at again: {after}",
}
