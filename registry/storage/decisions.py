"""Decisions taken on a study, and whether they held."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from registry.storage.tables import Decision, Person


def add_decision(session: Session, study_id: int, fields: Mapping[str, Any]) -> int:
    """Set down a decision; returns its number within the study."""
    last = session.scalar(select(func.max(Decision.number)).where(Decision.study_id == study_id))
    number = (last or 0) + 1
    session.add(Decision(study_id=study_id, number=number, held=None, held_note=None, held_at=None, **fields))
    return number


def find_decision(session: Session, study_id: int, number: int) -> Decision | None:
    """Find one decision of a study."""
    return session.get(Decision, (study_id, number))


def decisions_of(session: Session, study_id: int) -> list[tuple[Decision, str]]:
    """List the decisions of a study with who took them, the newest first."""
    rows = session.execute(
        select(Decision, Person.name)
        .join(Person, Person.id == Decision.person_id)
        .where(Decision.study_id == study_id)
        .order_by(Decision.number.desc())
    )
    return [(decision, name) for decision, name in rows]
