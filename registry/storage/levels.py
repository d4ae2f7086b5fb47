"""Levels of a series: what they are called, what they mean, and which studies use them."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from registry.storage.tables import Factor, Level, LevelAlias, Study, StudyFactor, StudyLevel


def level_of_series(session: Session, series_id: int, level_id: int) -> tuple[Level, Factor] | None:
    """Find a level by its key, with its factor, when it belongs to a series."""
    row = session.execute(
        select(Level, Factor)
        .join(Factor, Factor.id == Level.factor_id)
        .where(Level.id == level_id, Factor.series_id == series_id)
    ).first()
    return (row[0], row[1]) if row else None


def holder_of_name(session: Session, factor_id: int, name: str) -> Level | None:
    """Find the level of a factor that goes or has gone by a name, whatever the case of its letters."""
    folded = name.casefold()
    levels = session.scalars(select(Level).where(Level.factor_id == factor_id)).all()
    also = aliases_of(session, [level.id for level in levels])
    for level in levels:
        if folded in {known.casefold() for known in (level.name, *also[level.id])}:
            return level
    return None


def aliases_of(session: Session, level_ids: Sequence[int]) -> dict[int, list[str]]:
    """List the other names that some levels have gone by."""
    found: dict[int, list[str]] = defaultdict(list)
    rows = session.execute(
        select(LevelAlias.level_id, LevelAlias.name).where(LevelAlias.level_id.in_(level_ids)).order_by(LevelAlias.name)
    )
    for level_id, name in rows:
        found[level_id].append(name)
    return found


def rename(session: Session, level: Level, name: str) -> None:
    """Call a level by another name; the old one stays as an alias, the new one stops being one."""
    taken_back = session.get(LevelAlias, (level.id, name))
    if taken_back is not None:
        session.delete(taken_back)
    session.add(LevelAlias(level_id=level.id, name=level.name))
    level.name = name


def add_successor(session: Session, level: Level, *, name: str, definition: str) -> Level:
    """Add the level that another one turns into when its meaning changes."""
    row = Level(factor_id=level.factor_id, name=name, definition=definition, running="", replaces_id=level.id)
    session.add(row)
    session.flush()  # The caller tells the key.
    return row


def studies_using(session: Session, level_id: int) -> list[Study]:
    """Lock the studies that use a level, in the order of their keys."""
    ids = select(StudyLevel.study_id).where(StudyLevel.level_id == level_id)
    return list(session.scalars(select(Study).where(Study.id.in_(ids)).order_by(Study.id).with_for_update()))


def uses_per_level(session: Session, series_id: int) -> dict[int, int]:
    """Count the studies that use each level of a series."""
    rows = session.execute(
        select(StudyLevel.level_id, func.count())
        .join(
            StudyFactor,
            (StudyFactor.study_id == StudyLevel.study_id) & (StudyFactor.position == StudyLevel.position),
        )
        .join(Factor, Factor.id == StudyFactor.factor_id)
        .where(Factor.series_id == series_id)
        .group_by(StudyLevel.level_id)
    )
    return {level_id: int(count) for level_id, count in rows}
