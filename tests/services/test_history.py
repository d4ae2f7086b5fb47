"""What happened to a study, in sentences, page by page."""

from __future__ import annotations

from datetime import timedelta

import pytest
from sqlalchemy import update

from registry.errors import NotFound
from registry.services.history import PER_PAGE, study_history
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study, withdraw_study
from registry.services.trial_edit import (
    change_step,
    correct_reading,
    restore_reading,
    restore_trial,
    set_aside_reading,
    set_aside_trial,
)
from registry.services.trial_import import read_upload, run_import
from registry.services.trial_log import TrialEntry, log_trials
from registry.services.trial_pages import trial_detail
from registry.storage.tables import FreeText
from tests.support.studies import MINUTES, NOW, START, WALK, WRONG_PICK, Place, a_study, close_a_study, key_of
from tests.support.visitors import somebody, somebody_in


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def told(place: Place, *, page: int = 1) -> list[str]:
    return [event.words for event in study_history(place.database, place.keeper, place.study_id, page=page).events]


def test_every_kind_of_change_is_a_sentence_the_newest_first(place: Place) -> None:
    here = (place.database, place.keeper, place.study_id)
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    correct_reading(*here, 1, response="minutes", text="7.2", reason="misread", now=NOW)
    set_aside_reading(*here, 1, response="minutes", reason="watch", now=NOW)
    restore_reading(*here, 1, response="minutes", reason="watch was right", now=NOW)
    set_aside_trial(*here, 1, reason="aisle blocked", now=NOW)
    restore_trial(*here, 1, reason="it was not", now=NOW)
    change_step(*here, response="minutes", step="0.05", reason="new watch", now=NOW)
    close_study(*here, reason="early", note="hall needed", now=NOW)

    assert told(place) == [
        "Study closed: early",
        "Step of minutes changed from 0.1 to 0.05",
        "Trial 1 restored",
        "Trial 1 set aside",
        "Trial 1: minutes 7.2 restored",
        "Trial 1: minutes 7.2 set aside",
        "Trial 1: minutes corrected from 7.1 to 7.2",
        "Trial 1 logged: return, back: minutes 7.1",
        "Study started",
        "Study made",
    ]
    events = study_history(*here).events
    assert events[0].reason == "hall needed"
    assert {event.person for event in events} == {place.keeper.name}


def test_a_locked_plan_tells_its_size(database: Database) -> None:
    place = a_study(database, started=False)
    lock_plan(database, place.keeper, place.study_id, PlanDraft("4"), now=NOW)
    start_study(database, place.keeper, place.study_id, now=NOW)

    assert told(place)[1] == "Plan locked: 4 trials a combination, 24 in all"


def test_a_long_history_stands_on_pages(place: Place) -> None:
    for key in range(PER_PAGE):
        place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=key)

    first = study_history(place.database, place.keeper, place.study_id)
    second = study_history(place.database, place.keeper, place.study_id, page=2)

    assert (first.pages, len(first.events), len(second.events)) == (2, PER_PAGE, 2)
    assert [event.words for event in second.events] == ["Study started", "Study made"]
    # A page beyond the last is the last, and one before the first is the first.
    assert study_history(place.database, place.keeper, place.study_id, page=99).page == 2
    assert study_history(place.database, place.keeper, place.study_id, page=-1).page == 1


def test_a_stranger_learns_nothing_of_it(place: Place) -> None:
    stranger = somebody(place.database, "stranger@example.org")

    with pytest.raises(NotFound, match=f"there is no study {place.study_id} for you"):
        study_history(place.database, stranger, place.study_id)


def test_a_reading_added_later_is_told_apart_from_one_corrected(database: Database) -> None:
    place = a_study(database, responses=(MINUTES, WRONG_PICK))
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    correct_reading(database, place.keeper, place.study_id, 1, response="wrong pick", text="no", reason="late", now=NOW)

    assert told(place)[0] == "Trial 1: wrong pick added, no"


def test_an_import_is_one_event_with_the_name_of_its_file(place: Place) -> None:
    content = b"walk,start,minutes\nreturn,back,7.1\nreturn,front,6.4\nserpentine,back,7.7\n"
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    job = read_upload(place.database, place.keeper, place.study_id, name="tours.csv", content=content, now=NOW)
    choices = [ColumnChoice("factor", "walk"), ColumnChoice("factor", "start"), ColumnChoice("response", "minutes")]
    run_import(place.database, place.keeper, place.study_id, job, choices=choices, round_offered=False, now=NOW)

    newest, before, *_ = study_history(place.database, place.keeper, place.study_id).events
    assert (newest.words, newest.reason) == ("Trials 2 to 4 imported", "tours.csv")
    assert before.words == "Trial 1 logged: return, back: minutes 7.1"


def test_a_study_given_up_says_so_with_its_reason(place: Place) -> None:
    withdraw_study(place.database, place.keeper, place.study_id, note="the hall burnt down", now=NOW)

    newest = study_history(place.database, place.keeper, place.study_id).events[0]
    assert (newest.words, newest.reason) == ("Study withdrawn", "the hall burnt down")


def test_a_study_closed_at_its_size_needs_no_reason(place: Place) -> None:
    closed = close_a_study(
        place, title="Second", readings={(walk, end): ["7.1", "7.3"] for walk in WALK.levels for end in START.levels}
    )

    newest = study_history(place.database, place.keeper, closed).events[0]
    assert (newest.words, newest.reason) == ("Study closed: size reached", None)


def test_a_trial_has_its_own_part_of_the_history(place: Place) -> None:
    here = (place.database, place.keeper, place.study_id)
    for key in (1, 2):
        place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=key)
    set_aside_trial(*here, 1, reason="aisle blocked", now=NOW)
    set_aside_trial(*here, 2, reason="aisle blocked too", now=NOW)

    events = trial_detail(*here, 1).history
    # Numbers are those of the study's chain: made, started, two trials logged, then set aside.
    assert [(event.number, event.words) for event in events] == [
        (5, "Trial 1 set aside"),
        (3, "Trial 1 logged: return, back: minutes 7.1"),
    ]


def test_a_note_is_told_with_the_trial_until_it_is_erased(place: Place) -> None:
    entry = TrialEntry(key_of(1), {"walk": "return", "start": "back"}, {"minutes": "7.1"}, NOW, note="Ann was ill")
    log_trials(place.database, place.keeper, place.study_id, [entry], now=NOW)

    before = study_history(place.database, place.keeper, place.study_id).events[0]
    with place.database.write() as session:
        session.execute(update(FreeText).values(body=None, erased_at=NOW))
    after = study_history(place.database, place.keeper, place.study_id).events[0]

    assert (before.words, before.reason) == ("Trial 1 logged: return, back: minutes 7.1", "Ann was ill")
    assert (after.words, after.reason) == (before.words, "(erased)")


def test_everybody_with_a_role_reads_who_did_what_and_when(place: Place) -> None:
    logger = somebody_in(place.database, place.keeper, place.series_id, role="logger")
    viewer = somebody_in(place.database, place.keeper, place.series_id, role="viewer")
    entry = TrialEntry(key_of(1), {"walk": "return", "start": "back"}, {"minutes": "7.1"}, NOW)
    log_trials(place.database, logger, place.study_id, [entry], now=NOW + timedelta(hours=3))

    page = study_history(place.database, viewer, place.study_id)

    # A study is started a minute after it is made.
    assert [(event.number, event.person, event.at - NOW) for event in page.events] == [
        (3, "Logger", timedelta(hours=3)),
        (2, "Kim Keeper", timedelta(minutes=1)),
        (1, "Kim Keeper", timedelta()),
    ]
    assert page.card.title == "Walk and start"
