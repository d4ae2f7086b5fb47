"""Opening the registry for those who must not see storage."""

from __future__ import annotations

from registry.storage.engine import Database, open_database

__all__ = ["Database", "open_registry"]


def open_registry(url: str) -> Database:
    """Open the registry at a database address; creates and changes nothing."""
    return open_database(url)
