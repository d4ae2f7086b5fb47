"""Opening a database, and the two units of work: read and write."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, Literal

from sqlalchemy import Connection, Engine, create_engine, event, make_url
from sqlalchemy.exc import (
    ArgumentError,
    DatabaseError,
    DataError,
    IntegrityError,
    InternalError,
    ProgrammingError,
)
from sqlalchemy.orm import Session

from registry.errors import DatabaseNotReady, Fault, SettingMissing

BUSY_SECONDS = 30
_UNIT = "weftbook_unit"


@dataclass(frozen=True)
class Database:
    """An open registry database; hands out units of work."""

    engine: Engine

    @property
    def dialect(self) -> Literal["sqlite", "postgresql"]:
        """Which of the two databases this is."""
        return "sqlite" if self.engine.dialect.name == "sqlite" else "postgresql"

    @contextmanager
    def read(self) -> Iterator[Session]:
        """Give a session that sees one moment of the record and cannot change it."""
        options: dict[str, Any] = {_UNIT: "read"}
        if self.dialect == "postgresql":
            options |= {"isolation_level": "REPEATABLE READ", "postgresql_readonly": True}
        with self._session(options) as session:
            yield session
            session.rollback()

    @contextmanager
    def write(self) -> Iterator[Session]:
        """Give a session whose work is kept whole when the block ends well, and dropped whole when not."""
        with self._session({_UNIT: "write"}) as session:
            yield session
            session.commit()

    @contextmanager
    def _session(self, options: dict[str, Any]) -> Iterator[Session]:
        bound = self.engine.execution_options(**options)
        with Session(bound, expire_on_commit=False) as session:
            try:
                yield session
            except DatabaseError as error:
                if isinstance(error, IntegrityError | DataError | ProgrammingError | InternalError):
                    raise  # These are faults of ours, to be seen whole.
                session.rollback()
                raise DatabaseNotReady(_trouble(error)) from error

    def dispose(self) -> None:
        """Close every connection."""
        self.engine.dispose()


def open_database(url: str) -> Database:
    """Open the database at ``url``: ``sqlite:///file`` or ``postgresql://...``; nothing is created or changed."""
    engine = create_engine(_checked(url), pool_pre_ping=True)
    if engine.dialect.name == "sqlite":
        event.listen(engine, "connect", _prepare_sqlite)
        event.listen(engine, "begin", _begin_sqlite)
    return Database(engine)


def _checked(url: str) -> str:
    try:
        parsed = make_url(url)
    except ArgumentError:
        parsed = None
    backend = parsed.get_backend_name() if parsed else ""
    if parsed is None or backend not in ("sqlite", "postgresql"):
        # The address may hold a password, so the fault names the setting and not its value.
        raise SettingMissing(
            Fault(
                "WEFTBOOK_DATABASE_URL",
                "not an address of a database this registry knows",
                "give sqlite:///path/to/file.db or postgresql://user@host/name",
                "database_url",
            )
        )
    if backend == "postgresql":
        parsed = parsed.set(drivername="postgresql+psycopg")
    return parsed.render_as_string(hide_password=False)


def _prepare_sqlite(connection: Any, _record: object) -> None:
    # The driver must not open transactions by itself: the unit of work says BEGIN, and which kind.
    connection.isolation_level = None
    cursor = connection.cursor()
    for pragma in (
        "journal_mode = WAL",
        "foreign_keys = ON",
        "synchronous = NORMAL",
        f"busy_timeout = {BUSY_SECONDS * 1000}",
    ):
        cursor.execute(f"PRAGMA {pragma}")
    cursor.close()


def _begin_sqlite(connection: Connection) -> None:
    # A write begins IMMEDIATE, so that it waits its turn here and never fails half way;
    # a read sets query_only, so that looking at a page cannot change the record.
    reading = connection.get_execution_options().get(_UNIT) == "read"
    connection.exec_driver_sql(f"PRAGMA query_only = {'ON' if reading else 'OFF'}")
    connection.exec_driver_sql("BEGIN" if reading else "BEGIN IMMEDIATE")


def _trouble(error: DatabaseError) -> Fault:
    reason = str(error.orig).strip().splitlines()[0] if error.orig else "no reason given"
    return Fault(
        "database", reason, "check that it runs, that `weftbook upgrade` was run, and that nobody holds it locked"
    )
