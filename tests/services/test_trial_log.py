"""Trials are logged whole, exactly once, and never lost."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from datetime import datetime, timedelta

import pytest

from registry.errors import AlreadyThere, InputRefused, NotAllowed, NotFound, NotNow, ReadingRefused
from registry.services.opening import Database
from registry.services.people import add_person, grant
from registry.services.study_plan import close_study
from registry.services.trial_log import TrialEntry, log_trials
from registry.services.trial_pages import log_sheet, trial_detail, trial_list
from registry.services.upkeep import recount
from tests.support.studies import (
    CHEAP,
    MINUTES,
    NOW,
    PASSWORD,
    WRONG_PICK,
    FactorDraft,
    a_study,
    key_of,
)

BACK = {"walk": "return", "start": "back"}


def entry(number: int, **changes: object) -> TrialEntry:
    fields = {"key": key_of(number), "levels": BACK, "readings": {"minutes": "7.1"}, "happened_at": NOW} | changes
    return TrialEntry(**fields)  # type: ignore[arg-type]


def test_the_same_entry_sent_twice_is_one_trial(database: Database) -> None:
    place = a_study(database)

    first = log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)
    again = log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW + timedelta(hours=1))

    assert [(logged.number, logged.created) for logged in (*first, *again)] == [(1, True), (1, False)]
    assert trial_list(database, place.keeper, place.study_id).total == 1


def test_an_entry_that_arrives_again_after_closing_is_answered_and_not_refused(database: Database) -> None:
    place = a_study(database)
    log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)
    close_study(database, place.keeper, place.study_id, reason="early", note="enough seen", now=NOW)

    (again,) = log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)

    assert (again.number, again.created) == (1, False)


def test_a_used_key_with_other_content_is_refused(database: Database) -> None:
    place = a_study(database)
    log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)

    with pytest.raises(
        AlreadyThere, match="this entry was logged as trial 1 already, with other content; log it again"
    ):
        log_trials(database, place.keeper, place.study_id, [entry(1, readings={"minutes": "7.2"})], now=NOW)


def test_a_list_is_taken_whole_or_refused_whole_with_every_fault_named(database: Database) -> None:
    place = a_study(database)
    entries = [
        entry(1),
        entry(2, readings={"minutes": "7,1"}),
        entry(3, levels={"walk": "zigzag", "start": "back", "day": "Monday"}),
        entry(4, readings={}),
        entry(5, happened_at=datetime(2026, 3, 2, 9, 0)),  # noqa: DTZ001 - a time without zone is the point.
        entry(6, happened_at=NOW + timedelta(days=1)),
        entry(7, note="x" * 2001),
    ]

    with pytest.raises(InputRefused) as refusal:
        log_trials(database, place.keeper, place.study_id, entries, now=NOW)

    texts = [str(fault) for fault in refusal.value.faults]
    assert texts[0].startswith("trial 2, minutes: '7,1'")
    assert texts[1:3] == [
        "trial 3, day: this study has no factor 'day'; its factors are walk, start",
        "trial 3, walk: 'zigzag' given; choose one of serpentine, largest gap, return",
    ]
    assert texts[3] == "trial 4: no reading given; give at least one, for example minutes"
    assert texts[4].startswith("trial 5, time: 2026-03-02 09:00:00 has no time zone")
    assert texts[5].startswith("trial 6, time: 2026-03-03 09:00 has not come yet")
    assert texts[6] == "trial 7, note: 2001 characters given; give at most 2000"
    assert len(texts) == 7
    assert trial_list(database, place.keeper, place.study_id).total == 0


@pytest.mark.parametrize(
    ("text", "fix"),
    [("1e400", "1e400"), ("NaN", "NaN"), ("1,5", "1.5"), ("12.34", "12.3"), ("738.0000000000001", "738.0")],
)
def test_a_reading_that_cannot_be_kept_exactly_is_refused_with_the_fix(database: Database, text: str, fix: str) -> None:
    place = a_study(database)

    with pytest.raises(InputRefused, match=f"minutes: .*{fix}"):
        log_trials(database, place.keeper, place.study_id, [entry(1, readings={"minutes": text})], now=NOW)


def test_a_reading_far_from_the_first_one_is_refused_as_a_slip_of_the_unit(database: Database) -> None:
    place = a_study(database)
    log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)

    with pytest.raises(
        ReadingRefused, match="more than 68719476736 steps of 0.1 from the first reading, 7.1; check the unit"
    ):
        log_trials(database, place.keeper, place.study_id, [entry(2, readings={"minutes": "6871947680.9"})], now=NOW)


def test_keys_are_checked_before_anything_else(database: Database) -> None:
    place = a_study(database)

    with pytest.raises(InputRefused, match="key: 'seven' given; give a UUID"):
        log_trials(database, place.keeper, place.study_id, [entry(1, key="seven")], now=NOW)
    with pytest.raises(InputRefused, match="stands twice in this list"):
        log_trials(database, place.keeper, place.study_id, [entry(1), entry(1)], now=NOW)
    with pytest.raises(InputRefused, match="0 given; send 1 to 1000 at once"):
        log_trials(database, place.keeper, place.study_id, [], now=NOW)


def test_trials_are_logged_only_while_the_study_runs(database: Database) -> None:
    place = a_study(database, started=False)

    with pytest.raises(NotNow, match="Walk and start is planned; start it first"):
        log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)


def test_a_viewer_may_not_log_and_a_stranger_may_not_know(database: Database) -> None:
    place = a_study(database)
    viewer, stranger = (
        add_person(
            database, name=name, address=f"{name}@example.org", password=PASSWORD, keeper=False, now=NOW, hashing=CHEAP
        )
        for name in ("vera", "sam")
    )
    grant(database, place.keeper, place.series_id, address=viewer.address, role="viewer", now=NOW)

    with pytest.raises(NotAllowed, match="logger"):
        log_trials(database, viewer, place.study_id, [entry(1)], now=NOW)
    with pytest.raises(NotFound, match="there is no study"):
        log_trials(database, stranger, place.study_id, [entry(1)], now=NOW)


def test_yes_and_no_are_read_and_shown_as_words(database: Database) -> None:
    place = a_study(database, responses=(MINUTES, WRONG_PICK))

    place.log(BACK, {"minutes": "7.1", "wrong pick": "Yes"}, key=1)

    shown = trial_detail(database, place.keeper, place.study_id, 1).trial
    assert [(reading.response, reading.text) for reading in shown.readings] == [
        ("minutes", "7.1"),
        ("wrong pick", "yes"),
    ]
    with pytest.raises(InputRefused, match="wrong pick: '2' given; give yes or no"):
        place.log(BACK, {"wrong pick": "2"}, key=2)


NAMES = ["C", "Q", "id", "select", 'a, "b"', "🚚 route", "x" * 200, "'; DROP TABLE trial; --", "__proto__", "{{ 7*7 }}"]


@pytest.mark.parametrize("name", NAMES)
def test_a_factor_may_have_any_name(database: Database, name: str) -> None:
    factor = FactorDraft(name, "treatment", ("one, two", 'three "four"', "select"))
    place = a_study(database, factors=(factor, FactorDraft("other", "treatment", ("C", "Q"))))

    place.log({name: 'three "four"', "other": "Q"}, {"minutes": "7.1"}, key=1)

    shown = trial_detail(database, place.keeper, place.study_id, 1).trial
    assert dict(shown.levels) == {name: 'three "four"', "other": "Q"}


def test_the_log_sheet_counts_every_combination(database: Database) -> None:
    place = a_study(database)
    place.log(BACK, {"minutes": "7.1"}, key=1)
    place.log(BACK, {"minutes": "7.3"}, key=2)

    sheet = log_sheet(database, place.keeper, place.study_id)

    assert len(sheet.cells) == 6
    assert {cell.levels: cell.count for cell in sheet.cells}["return", "back"] == 2
    assert [trial.number for trial in sheet.recent] == [2, 1]


def test_writers_at_the_same_time_lose_nothing(database: Database) -> None:
    place = a_study(database)
    everybody = 8
    each = 6

    def write(who: int) -> list[int]:
        return [
            place.log(
                {"walk": "return", "start": ("front", "back")[turn % 2]},
                {"minutes": f"{who}.{turn}"},
                key=who * 100 + turn,
            )
            for turn in range(each)
        ]

    with ThreadPoolExecutor(everybody) as pool:
        numbers = [number for written in pool.map(write, range(everybody)) for number in written]

    assert sorted(numbers) == list(range(1, everybody * each + 1))
    assert recount(database).faults == ()


def test_the_same_entry_sent_by_two_at_once_is_one_trial(database: Database) -> None:
    place = a_study(database)

    def send(_: int) -> bool:
        return log_trials(database, place.keeper, place.study_id, [entry(1)], now=NOW)[0].created

    with ThreadPoolExecutor(4) as pool:
        assert sorted(pool.map(send, range(4))) == [False, False, False, True]
