"""A recount names what was altered behind the registry's back; health says what serves."""

from __future__ import annotations

import pytest
from sqlalchemy import text

from registry.errors import DatabaseNotReady
from registry.services.opening import Database, open_registry
from registry.services.trial_edit import set_aside_trial
from registry.services.upkeep import health, recount, upgrade
from tests.support.studies import NOW, Place, a_study


@pytest.fixture
def place(database: Database) -> Place:
    """Make a study with three trials, one of them set aside."""
    place = a_study(database)
    for key, minutes in enumerate(("7.1", "7.4", "6.9"), start=1):
        place.log({"walk": "return", "start": "back"}, {"minutes": minutes}, key=key)
    set_aside_trial(database, place.keeper, place.study_id, 2, reason="aisle blocked", now=NOW)
    return place


def alter(place: Place, statement: str) -> None:
    with place.database.write() as session:
        session.execute(text(statement))


def test_a_recount_of_an_untouched_registry_finds_nothing(place: Place) -> None:
    found = recount(place.database)

    assert found.studies == 1
    assert found.faults == ()


@pytest.mark.parametrize("column", ["n", "total", "squares_low", "squares_high"])
def test_a_recount_names_the_cell_whose_tally_was_altered(place: Place, column: str) -> None:
    alter(place, f"UPDATE tally SET {column} = {column} + 1")

    (fault,) = recount(place.database).faults

    assert fault.startswith(
        f"study {place.study_id} (Walk and start), minutes, walk return, start back: the tally says n "
    )
    assert "a recount of the readings says n 2, sum -2, sum of squares 4" in fault


def test_a_recount_names_the_cell_whose_reading_was_altered(place: Place) -> None:
    alter(place, "UPDATE reading SET steps = 99 WHERE trial = 1")

    (fault,) = recount(place.database).faults

    assert "minutes, walk return, start back: the tally says n 2, sum -2, sum of squares 4" in fault


@pytest.mark.parametrize(
    "change",
    ["after = 'nothing'", "what = 'trial_restored'", "at = '2020-01-01 00:00:00.000000+00'", "trial = 9",
     "person_id = (SELECT max(id) FROM person)"],
)  # fmt: skip
def test_a_recount_names_the_event_that_was_altered(place: Place, change: str) -> None:
    alter(place, "INSERT INTO person (name, address, keeper, created_at)"
                 " VALUES ('Somebody', 'else@example.org', false, '2026-01-01 00:00:00.000000+00')")  # fmt: skip
    if place.database.dialect == "sqlite":
        change = change.replace("+00", "")
    alter(place, f"UPDATE event SET {change} WHERE number = 4")

    (fault,) = recount(place.database).faults

    assert fault.startswith(f"study {place.study_id}, event 4 (")
    assert fault.endswith("its content does not fit the chain")


def test_a_recount_names_the_event_that_was_taken_out(place: Place) -> None:
    alter(place, "DELETE FROM event WHERE number = 3")

    assert recount(place.database).faults == (f"study {place.study_id}, event 4: event 3 is missing",)


def test_a_recount_names_words_that_were_altered_but_not_words_erased_by_law(place: Place) -> None:
    alter(place, "UPDATE free_text SET body = 'a better excuse'")
    altered = recount(place.database).faults
    alter(place, "UPDATE free_text SET body = NULL")

    assert len(altered) == 1
    assert altered[0].endswith("(trial_set_aside): the words beside it were altered")
    assert recount(place.database).faults == ()


def test_a_recount_names_an_altered_event_of_the_registry_itself(place: Place) -> None:
    alter(place, "UPDATE registry_event SET after = 'nothing' WHERE number = 2")

    (fault,) = recount(place.database).faults

    assert fault.startswith("registry, event 2 (")


def test_health_says_which_database_serves_and_at_which_migration(database: Database) -> None:
    found = health(database)

    assert (found.database, found.migration) == (database.dialect, upgrade(database))


def test_health_refuses_a_database_without_the_tables(database_url: str) -> None:
    empty = open_registry(database_url)

    with pytest.raises(DatabaseNotReady, match="database: its tables are at no version; run `weftbook upgrade`"):
        health(empty)
    empty.dispose()
