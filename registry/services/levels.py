"""Levels of a series through time: renamed, or turned into another when their meaning changes."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from registry.errors import AlreadyThere, Fault, InputRefused, NotFound
from registry.services.access import Role, require_series
from registry.services.people import Person
from registry.services.text_check import checked_name, checked_text
from registry.storage.engine import Database
from registry.storage.history import Happening, append_events, append_registry_event, lock_registry
from registry.storage.levels import (
    add_successor,
    aliases_of,
    holder_of_name,
    level_of_series,
    rename,
    studies_using,
    uses_per_level,
)
from registry.storage.studies import factors_of_series


@dataclass(frozen=True)
class LevelLine:
    """One level: its name, the names it has also gone by, what it means, and how many studies use it."""

    id: int
    name: str
    aliases: tuple[str, ...]
    definition: str
    replaces: str | None
    studies: int


@dataclass(frozen=True)
class FactorLevels:
    """A factor with every level its studies have had."""

    name: str
    levels: tuple[LevelLine, ...]


@dataclass(frozen=True)
class SeriesLevels:
    """The factors of a series and their levels, and what the person may do with them."""

    series_id: int
    series_name: str
    role: Role
    factors: tuple[FactorLevels, ...]


def series_levels(database: Database, person: Person, series_id: int) -> SeriesLevels:
    """Show the levels of a series, with the names they have gone by."""
    with database.read() as session:
        series, role = require_series(session, person, series_id, at_least="viewer")
        found = factors_of_series(session, series_id)
        levels = [level for _, of_factor in found for level in of_factor]
        names = {level.id: level.name for level in levels}
        aliases, uses = aliases_of(session, list(names)), uses_per_level(session, series_id)
        factors = tuple(
            FactorLevels(
                factor.name,
                tuple(
                    LevelLine(
                        level.id,
                        level.name,
                        tuple(aliases[level.id]),
                        level.definition,
                        names.get(level.replaces_id) if level.replaces_id else None,
                        uses.get(level.id, 0),
                    )
                    for level in of_factor
                ),
            )
            for factor, of_factor in found
        )
        return SeriesLevels(series.id, series.name, role, factors)


def rename_level(
    database: Database, person: Person, series_id: int, level_id: int, *, name: str, reason: str, now: datetime
) -> None:
    """Call a level by another name everywhere; it stays the same level, and the old name still finds it.

    Every study that uses the level gets the renaming in its history. Raises AlreadyThere
    when another level of the factor goes, or has gone, by the name.
    """
    faults: list[Fault] = []
    new_name = checked_name(name, where="new name", field="name", faults=faults)
    words = checked_text(reason, where="reason", field="reason", faults=faults, needed=True)
    if faults:
        raise InputRefused(faults)
    with database.write() as session:
        lock_registry(session)
        level, factor = _found(session, person, series_id, level_id)
        holder = holder_of_name(session, level.factor_id, new_name)
        if level.name == new_name or (holder is not None and holder.id != level.id):
            raise _name_taken(factor.name, new_name, holder.name if holder else new_name)
        before = level.name
        rename(session, level, new_name)
        told = Happening(
            "level_renamed", before=_pair(factor.name, before), after=_pair(factor.name, new_name), words=words
        )
        for study in studies_using(session, level.id):
            study.revision += 1
            append_events(session, study.id, [told], person_id=person.id, now=now)
        append_registry_event(
            session, "level_renamed", person_id=person.id, before=told.before, after=told.after, now=now
        )


def change_meaning(
    database: Database, person: Person, series_id: int, level_id: int, *, name: str, definition: str, now: datetime
) -> int:
    """Set down that a level means something else from now on: that is a new level, which needs a name of its own.

    Studies so far keep the old one, and the two are never compared as one; returns the new key.
    """
    faults: list[Fault] = []
    new_name = checked_name(name, where="name from now on", field="name", faults=faults)
    meaning = checked_text(definition, where="what it means now", field="definition", faults=faults, needed=True)
    if faults:
        raise InputRefused(faults)
    with database.write() as session:
        lock_registry(session)
        level, factor = _found(session, person, series_id, level_id)
        holder = holder_of_name(session, level.factor_id, new_name)
        if holder is not None:
            raise _name_taken(factor.name, new_name, holder.name)
        row = add_successor(session, level, name=new_name, definition=meaning)
        append_registry_event(
            session,
            "level_redefined",
            person_id=person.id,
            before=_pair(factor.name, level.name),
            after=_pair(factor.name, new_name),
            now=now,
        )
        return row.id


def _found(session: Any, person: Person, series_id: int, level_id: int) -> tuple[Any, Any]:
    require_series(session, person, series_id, at_least="analyst")
    found = level_of_series(session, series_id, level_id)
    if found is None:
        raise NotFound(Fault("level", f"this series has no level {level_id}", "choose one from its levels"))
    return found


def _name_taken(factor: str, name: str, holder: str) -> AlreadyThere:
    known = f"{holder!r} goes by it" if holder == name else f"{holder!r} has gone by it"
    return AlreadyThere(
        Fault(f"factor {factor}, name", f"{name!r} given, but {known}", "choose a name no level has had", "name")
    )


def _pair(factor: str, level: str) -> str:
    return json.dumps({"factor": factor, "level": level}, ensure_ascii=False)
