"""Bringing a database's tables to those of this version."""

from __future__ import annotations

from importlib.resources import as_file, files

from alembic import command
from alembic.config import Config
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory

from registry.storage.engine import Database


def upgrade(database: Database) -> str:
    """Apply every migration that is missing; returns the revision the database is then at."""
    with as_file(files("migrations")) as folder:
        config = Config()
        config.set_main_option("script_location", str(folder).replace("%", "%%"))
        with database.write() as session:
            config.attributes["connection"] = session.connection()
            command.upgrade(config, "head")
    return current_revision(database) or ""


def current_revision(database: Database) -> str | None:
    """Say at which revision the database is; None when it has no tables of the registry."""
    with database.read() as session:
        return MigrationContext.configure(session.connection()).get_current_revision()


def newest_revision() -> str:
    """Say which revision this version of the program needs."""
    with as_file(files("migrations")) as folder:
        config = Config()
        config.set_main_option("script_location", str(folder).replace("%", "%%"))
        return ScriptDirectory.from_config(config).get_current_head() or ""
