"""The page to log on: the next run, times as the clock shows them, and an entry sent twice."""

from __future__ import annotations

import re

import pytest
from flask import Flask

from registry.services.opening import Database
from registry.services.run_order import run_list
from registry.services.study_plan import PlanDraft, lock_plan, start_study
from tests.support.studies import NOW, Place, a_study
from tests.support.visitors import Visitor, a_visitor, an_app, words_of

KEY = "11111111-1111-4111-8111-111111111111"


@pytest.fixture
def place(sqlite: Database) -> Place:
    made = a_study(sqlite, started=False)
    lock_plan(sqlite, made.keeper, made.study_id, PlanDraft("2"), now=NOW, seed=3)
    start_study(sqlite, made.keeper, made.study_id, now=NOW)
    return made


@pytest.fixture
def app(place: Place) -> Flask:
    return an_app(place.database)


@pytest.fixture
def keeper(app: Flask) -> Visitor:
    return a_visitor(app, "keeper@example.org")


def sent(place: Place, **fields: str) -> dict[str, object]:
    first = run_list(place.database, place.keeper, place.study_id)[0]
    levels = {f"levels-{name}": level for name, level in first.levels.items()}
    return {"key": KEY, "run": "1", **levels, "readings-minutes": "7.1"} | fields


def test_the_next_run_is_named_and_its_levels_are_chosen(place: Place, keeper: Visitor) -> None:
    first = run_list(place.database, place.keeper, place.study_id)[0]

    response = keeper.get(f"/studies/{place.study_id}/log")

    assert f"Next: run 1 of 12: walk {first.levels['walk']}, start {first.levels['start']}." in words_of(response)
    chosen = re.findall(r'value="([^"]+)" checked', response.text)
    assert chosen[:2] == list(first.levels.values())


def test_logging_and_skipping_move_on_to_the_next_run(place: Place, keeper: Visitor) -> None:
    address = f"/studies/{place.study_id}"
    assert keeper.post(f"{address}/log", sent(place)).status_code == 303
    assert "Next: run 2 of 12" in words_of(keeper.get(f"{address}/log"))

    refused = keeper.post(f"{address}/skip", {"run": "2", "skip_reason": " "})
    assert refused.status_code == 422
    assert "The run was not skipped" in words_of(refused)
    assert keeper.post(f"{address}/skip", {"run": "2", "skip_reason": "conveyor"}).status_code == 303

    words = words_of(keeper.get(f"{address}/log"))
    assert "Next: run 3 of 12" in words
    assert "1 run skipped so far, 10 waiting." in words


def test_an_entry_sent_again_with_other_content_can_be_logged_as_another_trial(place: Place, keeper: Visitor) -> None:
    address = f"/studies/{place.study_id}/log"
    keeper.post(address, sent(place, run=""))

    again = keeper.post(address, sent(place, run="", **{"readings-minutes": "9.9"}))

    assert again.status_code == 409
    assert "this entry was logged as trial 1 already" in words_of(again)
    assert 'value="9.9"' in again.text
    fresh = re.search(r'name="key" value="([^"]+)"', again.text)
    assert fresh
    assert fresh[1] != KEY
    retried = keeper.post(address, sent(place, run="", key=fresh[1], **{"readings-minutes": "9.9"}))
    assert retried.status_code == 303


@pytest.mark.parametrize(
    ("happened_at", "told"),
    [
        ("0001-01-01T00:00", "the year 1 given: give a time from 1970 on"),
        ("2025-03-30 02:30", "2025-03-30 02:30 was skipped by the clock there: check the hour"),
        ("soon", "'soon' given: write it as 2026-03-02 14:05, or leave it empty"),
        ("2030-01-01 00:00", "has not come yet: check the day and the clock"),
    ],
)
def test_a_time_that_cannot_have_been_is_refused_beside_the_field(
    place: Place, keeper: Visitor, happened_at: str, told: str
) -> None:
    response = keeper.post(f"/studies/{place.study_id}/log", sent(place, happened_at=happened_at))

    assert response.status_code == 422
    assert told in words_of(response)
    assert f'value="{happened_at}"' in response.text


def test_a_run_that_is_no_number_is_refused(place: Place, keeper: Visitor) -> None:
    response = keeper.post(f"/studies/{place.study_id}/log", sent(place, run="first"))

    assert response.status_code == 422
    assert "give the place of a run in the run order" in words_of(response)


def test_a_key_in_other_digits_stands_for_nothing(place: Place, keeper: Visitor) -> None:
    assert keeper.get(f"/studies/{place.study_id}").status_code == 200
    assert keeper.get("/studies/\N{ARABIC-INDIC DIGIT ONE}").status_code == 404
