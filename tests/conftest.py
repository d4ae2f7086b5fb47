"""Databases for tests: every storage and service test runs on SQLite and on PostgreSQL."""

from __future__ import annotations

import itertools
import os
import shutil
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from sqlalchemy import create_engine, text

from registry.storage.engine import Database, open_database
from registry.storage.upgrade import upgrade
from tests.support.postgres import NoServerError, Server, running_server

DIALECTS = ("sqlite", "postgresql")


def in_ci() -> bool:
    """Whether what is missing must fail instead of being skipped."""
    return os.environ.get("WEFTBOOK_CI") == "1"


@pytest.fixture(scope="session")
def postgres() -> Iterator[Server]:
    """One PostgreSQL server for the session; its absence fails in CI and skips elsewhere."""
    try:
        with running_server() as server:
            yield server
    except NoServerError as absence:
        if in_ci():
            raise
        pytest.skip(str(absence))


@pytest.fixture(scope="session")
def numbers() -> Iterator[int]:
    """Numbers that name databases apart."""
    return itertools.count(1)


def _command(server: Server, statement: str) -> None:
    engine = create_engine(server.url("postgres"), isolation_level="AUTOCOMMIT")
    with engine.connect() as connection:
        connection.execute(text(statement))
    engine.dispose()


def _empty_url(dialect: str, request: pytest.FixtureRequest, folder: Path, number: int) -> str:
    if dialect == "sqlite":
        return f"sqlite:///{folder / f'empty{number}.db'}"
    server: Server = request.getfixturevalue("postgres")
    _command(server, f"CREATE DATABASE empty{number} TEMPLATE template0")
    return server.url(f"empty{number}")


@pytest.fixture(scope="session")
def templates(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], str]:
    """Give the address of a migrated database that is copied for each test."""
    made: dict[str, str] = {}
    folder = tmp_path_factory.mktemp("templates")

    def template(dialect: str) -> str:
        if dialect not in made:
            url = f"sqlite:///{folder / 'template.db'}"
            if dialect == "postgresql":
                server: Server = request.getfixturevalue("postgres")
                _command(server, "CREATE DATABASE ready TEMPLATE template0")
                url = server.url("ready")
            database = open_database(url)
            upgrade(database)
            if dialect == "sqlite":
                # A copy of the file must hold everything, so the journal is folded into it.
                with database.engine.connect() as connection:
                    connection.exec_driver_sql("COMMIT")
                    connection.exec_driver_sql("PRAGMA wal_checkpoint(TRUNCATE)")
                    connection.exec_driver_sql("BEGIN")
            database.dispose()
            made[dialect] = url
        return made[dialect]

    return template


@pytest.fixture
def make_database(
    request: pytest.FixtureRequest, templates: Callable[[str], str], tmp_path: Path, numbers: Iterator[int]
) -> Iterator[Callable[[str], Database]]:
    """Make migrated databases, as many as a test needs."""
    opened: list[Database] = []

    def make(dialect: str) -> Database:
        number = next(numbers)
        template = templates(dialect)
        if dialect == "sqlite":
            path = tmp_path / f"registry{number}.db"
            shutil.copy(template.removeprefix("sqlite:///"), path)
            url = f"sqlite:///{path}"
        else:
            server: Server = request.getfixturevalue("postgres")
            _command(server, f"CREATE DATABASE registry{number} TEMPLATE ready")
            url = server.url(f"registry{number}")
        opened.append(open_database(url))
        return opened[-1]

    yield make
    for database in opened:
        database.dispose()


@pytest.fixture(params=DIALECTS)
def dialect(request: pytest.FixtureRequest) -> str:
    """Give each of the two databases in turn."""
    return str(request.param)


@pytest.fixture
def database(dialect: str, make_database: Callable[[str], Database]) -> Database:
    """Give a migrated registry, on each of the two databases in turn."""
    return make_database(dialect)


@pytest.fixture
def sqlite(make_database: Callable[[str], Database]) -> Database:
    """Give a migrated registry on SQLite alone, for tests to which the database does not matter."""
    return make_database("sqlite")


@pytest.fixture
def database_url(dialect: str, request: pytest.FixtureRequest, tmp_path: Path, numbers: Iterator[int]) -> str:
    """Give the address of an empty database, on each of the two in turn."""
    return _empty_url(dialect, request, tmp_path, next(numbers))


@pytest.fixture
def empty_pair(dialect: str, request: pytest.FixtureRequest, tmp_path: Path, numbers: Iterator[int]) -> tuple[str, str]:
    """Give the addresses of two empty databases of the same kind."""
    return tuple(_empty_url(dialect, request, tmp_path, next(numbers)) for _ in range(2))  # type: ignore[return-value]
