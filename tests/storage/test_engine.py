"""The two units of work: a read that cannot write, a write that is kept whole or not at all."""

from __future__ import annotations

import threading

import pytest
from sqlalchemy import select, text
from sqlalchemy.exc import IntegrityError, InternalError

from registry.errors import DatabaseNotReady, SettingMissing
from registry.storage.engine import Database, open_database
from registry.storage.tables import Series, Study
from tests.support.studies import NOW, a_study


def test_a_read_cannot_change_the_record(database: Database) -> None:
    a_study(database)

    def write() -> None:
        with database.read() as session:
            session.execute(text("UPDATE study SET title = 'changed'"))
            session.commit()

    # SQLite calls it a fault of the database, PostgreSQL one of the statement.
    with pytest.raises((DatabaseNotReady, InternalError), match=r"readonly|read-only"):
        write()

    with database.read() as session:
        assert session.scalars(select(Study.title)).one() == "Walk and start"


def test_a_write_that_fails_leaves_nothing(database: Database) -> None:
    place = a_study(database)

    def write() -> None:
        with database.write() as session:
            session.execute(text("UPDATE study SET title = 'changed'"))
            raise RuntimeError("half way")

    with pytest.raises(RuntimeError, match="half way"):
        write()

    with database.read() as session:
        assert session.get(Study, place.study_id).title == "Walk and start"  # type: ignore[union-attr]


def test_a_row_must_belong_to_what_it_refers_to(database: Database) -> None:
    a_study(database)

    with pytest.raises(IntegrityError), database.write() as session:
        session.add(Series(name="Nobody's", about="", created_at=NOW, created_by=999))


def test_a_second_writer_waits_for_the_first(database: Database) -> None:
    place = a_study(database)
    order: list[str] = []
    held, done = threading.Event(), threading.Event()

    def second() -> None:
        held.wait(10)
        with database.write() as session:
            session.execute(select(Study).where(Study.id == place.study_id).with_for_update())
            order.append("second")
        done.set()

    thread = threading.Thread(target=second)
    thread.start()
    with database.write() as session:
        session.execute(select(Study).where(Study.id == place.study_id).with_for_update())
        held.set()
        assert not done.wait(0.5)
        order.append("first")
    thread.join(10)

    assert order == ["first", "second"]


@pytest.mark.parametrize("url", ["mysql://somebody@host/name", "not an address", ""])
def test_an_address_of_another_database_is_refused_without_telling_it(url: str) -> None:
    with pytest.raises(SettingMissing, match="WEFTBOOK_DATABASE_URL: not an address of a database") as refusal:
        open_database(url)
    assert "somebody" not in str(refusal.value)
