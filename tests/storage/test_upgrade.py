"""A migrated database equals the models, constraints included, on both databases."""

from __future__ import annotations

import re

from sqlalchemy import text

from registry.storage.engine import Database, open_database
from registry.storage.tables import Base
from registry.storage.upgrade import current_revision, newest_revision, upgrade

_POSTGRES_CONSTRAINTS = """
    SELECT conrelid::regclass::text, conname, pg_get_constraintdef(oid)
    FROM pg_constraint WHERE connamespace = 'public'::regnamespace
"""
_POSTGRES_INDEXES = "SELECT tablename, indexname, indexdef FROM pg_indexes WHERE schemaname = 'public'"
_POSTGRES_COLUMNS = """
    SELECT table_name, column_name, data_type, character_maximum_length, is_nullable, column_default
    FROM information_schema.columns WHERE table_schema = 'public'
"""


def shape(database: Database) -> set[tuple[str, ...]]:
    """Everything the database says of its tables, in its own words, the order of columns left aside."""
    with database.read() as session:
        if database.dialect == "sqlite":
            rows = session.execute(text("SELECT name, sql FROM sqlite_master WHERE sql IS NOT NULL")).all()
            return {(name, part) for name, sql in rows if name != "alembic_version" for part in _parts(sql)}
        statements = (_POSTGRES_CONSTRAINTS, _POSTGRES_INDEXES, _POSTGRES_COLUMNS)
        rows = [row for statement in statements for row in session.execute(text(statement))]
        return {tuple(str(value) for value in row) for row in rows if row[0] != "alembic_version"}


def _parts(sql: str) -> list[str]:
    lines = [re.sub(r"\s+", " ", line).strip().rstrip(",") for line in sql.splitlines()]
    return [line for line in lines if line]


def test_a_migrated_database_equals_the_models(empty_pair: tuple[str, str]) -> None:
    migrated, made = (open_database(url) for url in empty_pair)
    upgrade(migrated)
    with made.write() as session:
        Base.metadata.create_all(session.connection())

    assert shape(migrated) == shape(made)
    assert len(shape(made)) > 200
    migrated.dispose()
    made.dispose()


def test_every_constraint_has_a_name_of_ours() -> None:
    unnamed = [
        f"{table.name}: {constraint}"
        for table in Base.metadata.sorted_tables
        for constraint in table.constraints
        if not constraint.name
    ]

    assert unnamed == []


def test_upgrading_twice_changes_nothing(database: Database) -> None:
    before = shape(database)

    revision = upgrade(database)

    assert revision == newest_revision() == current_revision(database)
    assert shape(database) == before


def test_keys_of_a_study_start_with_the_study() -> None:
    tables = [table for table in Base.metadata.sorted_tables if "study_id" in table.columns]
    keyed = [table for table in tables if table.columns["study_id"].primary_key]

    assert all(next(iter(table.primary_key.columns)).name == "study_id" for table in keyed)
    assert {table.name for table in tables} == {table.name for table in keyed}
