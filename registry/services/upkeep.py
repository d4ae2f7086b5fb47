"""Upkeep of the registry: upgrade, recount, health."""

from __future__ import annotations

from dataclasses import dataclass

from registry.errors import DatabaseNotReady, Fault
from registry.storage import upgrade as migrating
from registry.storage.engine import Database
from registry.storage.history import broken_links, broken_registry_links
from registry.storage.studies import study_ids
from registry.storage.tallies import wrong_tallies


@dataclass(frozen=True)
class Recount:
    """What a recount of the whole registry found; no faults means every tally and every chain is right."""

    studies: int
    faults: tuple[str, ...]


@dataclass(frozen=True)
class Health:
    """Whether the registry can serve: which database, and at which migration."""

    database: str
    migration: str


def upgrade(database: Database) -> str:
    """Bring the database to this version's tables; returns the migration it is then at."""
    return migrating.upgrade(database)


def recount(database: Database) -> Recount:
    """Count every tally afresh and follow every event chain; names each one that is wrong."""
    with database.read() as session:
        ids = study_ids(session)
        faults = list(broken_registry_links(session))
        for study_id in ids:
            faults += wrong_tallies(session, study_id)
            faults += broken_links(session, study_id)
    return Recount(len(ids), tuple(faults))


def health(database: Database) -> Health:
    """Say which database serves and at which migration; refuses when it is not this version's."""
    revision = migrating.current_revision(database)
    if revision != migrating.newest_revision():
        raise DatabaseNotReady(
            Fault("database", f"its tables are at {revision or 'no version'}", "run `weftbook upgrade`")
        )
    return Health(database.dialect, revision or "")
