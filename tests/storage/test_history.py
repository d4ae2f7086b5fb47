"""Each event vouches for the one before it, and words can be erased without breaking that."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime, timedelta, timezone

import pytest
from sqlalchemy import select, text
from sqlalchemy.exc import IntegrityError

from registry.services.opening import Database
from registry.services.trial_edit import set_aside_trial
from registry.storage.history import (
    START,
    Happening,
    append_registry_event,
    broken_links,
    broken_registry_links,
    hash_of_event,
    newest_events,
)
from registry.storage.tables import Event, FreeText, RegistryEvent
from registry.storage.units import write_study
from tests.support.studies import NOW, Place, a_keeper, a_study, another_study


@pytest.fixture
def place(database: Database) -> Place:
    """Make a study with two trials, both set aside in the same words: six events, the last two with words."""
    place = a_study(database)
    for key in (1, 2):
        place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=key)
    for number in (1, 2):
        set_aside_trial(database, place.keeper, place.study_id, number, reason="aisle blocked", now=NOW)
    return place


def chain(place: Place) -> Sequence[Event]:
    with place.database.read() as session:
        events = session.scalars(select(Event).where(Event.study_id == place.study_id).order_by(Event.number)).all()
        session.expunge_all()  # They are looked at after the read is over.
        return events


def broken(place: Place) -> list[str]:
    with place.database.read() as session:
        return broken_links(session, place.study_id)


def alter(place: Place, statement: str) -> None:
    with place.database.write() as session:
        session.execute(text(statement))


def test_a_chain_begins_at_nothing_and_each_event_carries_the_hash_before(place: Place) -> None:
    events = chain(place)

    assert [event.what for event in events] == [
        "study_made", "study_started", "trial_logged", "trial_logged", "trial_set_aside", "trial_set_aside",
    ]  # fmt: skip
    assert [event.previous for event in events] == [START, *(event.hash for event in events[:-1])]
    assert len({event.hash for event in events}) == len(events)


def test_the_hash_of_an_event_is_told_from_its_content_alone_in_any_zone() -> None:
    event = Event(
        study_id=3, number=7, at=datetime(2026, 3, 2, 9, 0, tzinfo=UTC), person_id=2, what="step_changed", trial=None,
        response_id=5, before="0.1", after="0.05", text_number=None, text_hash=None, previous=START,
    )  # fmt: skip

    # sha256sum of ["<64 zeros>",3,7,"2026-03-02T09:00:00.000000+00:00",2,"step_changed",null,5,"0.1","0.05",null,null]
    expected = "84e31227c32eae4f31e61ea96d2d19587e610322370c50c76a3208522f6a49f0"
    assert hash_of_event(event) == expected
    event.at = datetime(2026, 3, 2, 14, 30, tzinfo=timezone(timedelta(hours=5, minutes=30)))
    assert hash_of_event(event) == expected
    event.at += timedelta(microseconds=1)
    assert hash_of_event(event) != expected


def test_every_study_has_a_chain_of_its_own(place: Place) -> None:
    other = another_study(place.database, place.keeper, place.series_id, title="Other")
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=3)
    alter(place, f"UPDATE event SET after = 'nothing' WHERE study_id = {other} AND number = 1")

    assert [event.number for event in chain(place)] == [1, 2, 3, 4, 5, 6, 7]
    assert broken(place) == []
    with place.database.read() as session:
        assert broken_links(session, other) == [
            f"study {other}, event 1 (study_made): its content does not fit the chain"
        ]


def test_an_event_rewritten_together_with_its_hash_is_given_away_by_the_next_one(place: Place) -> None:
    with place.database.write() as session:
        event = session.get(Event, (place.study_id, 3))
        assert event is not None
        event.after = '{"levels": {"walk": "return", "start": "back"}, "readings": {"minutes": "6.1"}}'
        event.hash = hash_of_event(event)

    assert broken(place) == [f"study {place.study_id}, event 4 (trial_logged): its content does not fit the chain"]


def test_every_altered_event_is_named_and_no_other(place: Place) -> None:
    alter(place, "UPDATE event SET after = '6.1' WHERE number IN (3, 6)")

    assert broken(place) == [
        f"study {place.study_id}, event 3 (trial_logged): its content does not fit the chain",
        f"study {place.study_id}, event 6 (trial_set_aside): its content does not fit the chain",
    ]


def test_words_under_another_salt_are_named_though_they_read_the_same(place: Place) -> None:
    first, second = (event.text_number for event in chain(place)[-2:])
    alter(place, f"UPDATE free_text SET salt = (SELECT f.salt FROM free_text f WHERE f.number = {second})"
                 f" WHERE number = {first}")  # fmt: skip

    assert broken(place) == [f"study {place.study_id}, event 5 (trial_set_aside): the words beside it were altered"]


def test_the_same_words_twice_leave_different_hashes_so_that_one_does_not_tell_the_other(place: Place) -> None:
    first, second = chain(place)[-2:]
    with place.database.read() as session:
        bodies = session.scalars(select(FreeText.body)).all()

    assert bodies == ["aisle blocked", "aisle blocked"]
    assert first.text_hash != second.text_hash


def test_erased_words_leave_the_chain_whole_and_are_shown_as_erased(place: Place) -> None:
    hashes = [event.hash for event in chain(place)]
    with place.database.write() as session:
        words = session.get(FreeText, (place.study_id, chain(place)[4].text_number))
        assert words is not None
        words.body, words.erased_at = None, NOW

    assert broken(place) == []
    place.log({"walk": "return", "start": "front"}, {"minutes": "7.1"}, key=3)
    assert [event.hash for event in chain(place)][:6] == hashes
    assert broken(place) == []
    with place.database.read() as session:
        rows = newest_events(session, place.study_id, trial=None, limit=3, offset=0)
    assert [(row.what, row.trial, row.words) for row in rows] == [
        ("trial_logged", 3, None),
        ("trial_set_aside", 2, "aisle blocked"),
        ("trial_set_aside", 1, "(erased)"),
    ]


def test_words_an_event_refers_to_cannot_be_taken_out_of_the_record(place: Place) -> None:
    with pytest.raises(IntegrityError):
        alter(place, "DELETE FROM free_text")

    assert broken(place) == []


def test_a_unit_that_fails_adds_no_event_and_the_next_one_links_to_the_last_kept(place: Place) -> None:
    def fail() -> None:
        with write_study(place.database, place.study_id, person_id=place.keeper.id, now=NOW) as unit:
            unit.record(Happening("trial_restored", trial=1, words="never kept"))
            raise RuntimeError("half way")

    with pytest.raises(RuntimeError, match="half way"):
        fail()
    with write_study(place.database, place.study_id, person_id=place.keeper.id, now=NOW) as unit:
        unit.record(Happening("trial_restored", trial=1, words="kept"))
        unit.record(Happening("trial_restored", trial=2, words="kept as well"))

    events = chain(place)
    assert [(event.number, event.trial) for event in events[5:]] == [(6, 2), (7, 1), (8, 2)]
    assert (events[6].previous, events[7].previous) == (events[5].hash, events[6].hash)
    assert broken(place) == []
    with place.database.read() as session:
        assert "never kept" not in session.scalars(select(FreeText.body)).all()


def test_writers_at_the_same_time_make_one_chain_of_the_registry(database: Database) -> None:
    keeper = a_keeper(database)
    with database.read() as session:
        before = len(session.scalars(select(RegistryEvent)).all())

    def append(turn: int) -> None:
        with database.write() as session:
            append_registry_event(session, "series_made", person_id=keeper.id, after=str(turn), now=NOW)

    with ThreadPoolExecutor(8) as pool:
        list(pool.map(append, range(24)))

    with database.read() as session:
        assert broken_registry_links(session) == []
        made = session.scalars(select(RegistryEvent.after).order_by(RegistryEvent.number)).all()
    assert sorted(int(after or "") for after in made[before:]) == list(range(24))


def test_an_event_taken_out_of_the_registrys_own_chain_is_named(place: Place) -> None:
    alter(place, "DELETE FROM registry_event WHERE number = 1")

    with place.database.read() as session:
        assert broken_registry_links(session) == ["registry, event 2: event 1 is missing"]
