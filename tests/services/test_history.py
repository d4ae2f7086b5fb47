"""What happened to a study, in sentences, page by page."""

from __future__ import annotations

import pytest

from registry.errors import NotFound
from registry.services.history import PER_PAGE, study_history
from registry.services.opening import Database
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study
from registry.services.trial_edit import (
    change_step,
    correct_reading,
    restore_reading,
    restore_trial,
    set_aside_reading,
    set_aside_trial,
)
from tests.support.studies import NOW, Place, a_study
from tests.support.visitors import somebody


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
