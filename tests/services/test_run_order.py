"""The run order of a study: drawn with the plan, worked through run by run, skipped with a reason."""

from __future__ import annotations

import pytest

from registry.errors import InputRefused, NotAllowed, NotFound, NotNow
from registry.services.history import study_history
from registry.services.opening import Database
from registry.services.run_order import OrderState, run_list, skip_run
from registry.services.study_plan import PlanDraft, lock_plan, start_study
from registry.services.trial_log import TrialEntry, log_trials
from registry.services.trial_pages import log_sheet, trial_detail
from registry.services.upkeep import recount
from registry.storage.frame import fetch_frame
from registry.storage.tallies import fetch_tallies
from tests.support.studies import NOW, SHIFT, START, WALK, Place, a_study, key_of
from tests.support.visitors import somebody_in


@pytest.fixture
def place(database: Database) -> Place:
    return in_order(a_study(database, started=False))


def in_order(place: Place, *, per_cell: str = "2") -> Place:
    lock_plan(place.database, place.keeper, place.study_id, PlanDraft(per_cell), now=NOW, seed=7)
    start_study(place.database, place.keeper, place.study_id, now=NOW)
    return place


def state(place: Place, *, block: str | None = None) -> OrderState:
    found = log_sheet(place.database, place.keeper, place.study_id, block=block).order
    assert found is not None
    return found


def log_run(place: Place, position: int, levels: dict[str, str], *, key: int = 1) -> int:
    entry = TrialEntry(key_of(key), levels, {"minutes": "7.1"}, NOW, run=position)
    return log_trials(place.database, place.keeper, place.study_id, [entry], now=NOW)[0].number


def test_a_plan_locked_with_a_seed_draws_every_run(place: Place) -> None:
    runs = run_list(place.database, place.keeper, place.study_id)

    assert [run.position for run in runs] == list(range(1, 13))
    assert {run.state for run in runs} == {"waiting"}
    told = study_history(place.database, place.keeper, place.study_id).events
    assert "Run order of 12 runs drawn from seed 7" in [event.words for event in told]


def test_without_a_seed_there_is_no_order(database: Database) -> None:
    place = a_study(database)

    assert log_sheet(place.database, place.keeper, place.study_id).order is None
    assert run_list(place.database, place.keeper, place.study_id) == ()


def test_a_logged_run_is_done_and_the_next_one_follows(place: Place) -> None:
    first = state(place).following
    assert first is not None

    number = log_run(place, first.position, dict(first.levels))

    after = state(place)
    assert after.following is not None
    assert (after.following.position, after.waiting, after.skipped) == (2, 11, 0)
    trial = trial_detail(place.database, place.keeper, place.study_id, number).trial
    assert (trial.run, trial.as_run) == (1, None)


def test_a_run_done_at_other_levels_counts_as_assigned_and_keeps_both(place: Place) -> None:
    first = state(place).following
    assert first is not None
    other = "front" if first.levels["start"] == "back" else "back"

    number = log_run(place, 1, {**first.levels, "start": other})

    detail = trial_detail(place.database, place.keeper, place.study_id, number)
    assert detail.trial.levels == first.levels
    assert detail.trial.as_run == {**first.levels, "start": other}
    assert f"; actually run: {first.levels['walk']}, {other}" in detail.history[0].words
    with place.database.read() as session:
        frame = fetch_frame(session, place.study_id)
        tallies = fetch_tallies(session, place.study_id, frame.responses[0].response_id)
        counted = [frame.levels_of(cell) for cell, tally in tallies.items() if tally.n]
    assert counted == [first.levels]
    assert recount(place.database).faults == ()


def test_a_skipped_run_stays_with_its_reason(place: Place) -> None:
    skip_run(place.database, place.keeper, place.study_id, 1, reason="the conveyor stood still", now=NOW)

    after = state(place)
    assert after.following is not None
    assert (after.following.position, after.skipped) == (2, 1)
    run = run_list(place.database, place.keeper, place.study_id)[0]
    assert (run.state, run.skip_reason) == ("skipped", "the conveyor stood still")
    event = study_history(place.database, place.keeper, place.study_id).events[0]
    assert (event.words, event.reason) == ("Run 1 skipped", "the conveyor stood still")


def test_a_run_is_logged_or_skipped_once(place: Place) -> None:
    first = state(place).following
    assert first is not None
    log_run(place, 1, dict(first.levels))

    with pytest.raises(InputRefused, match="run 1: it is done already; take the next run that waits, or log without"):
        log_run(place, 1, dict(first.levels), key=2)
    with pytest.raises(InputRefused, match="run 99: there is no such run"):
        log_run(place, 99, dict(first.levels), key=3)
    with pytest.raises(NotNow, match="run 1 is done already; skip one that waits"):
        skip_run(place.database, place.keeper, place.study_id, 1, reason="x", now=NOW)


def test_the_same_entry_sent_twice_is_one_trial_of_its_run(place: Place) -> None:
    first = state(place).following
    assert first is not None

    assert log_run(place, 1, dict(first.levels)) == log_run(place, 1, dict(first.levels))
    assert state(place).waiting == 11


def test_a_skip_needs_a_reason_a_run_and_the_right_to_log(place: Place) -> None:
    with pytest.raises(InputRefused, match="reason: nothing given; say it in a few words"):
        skip_run(place.database, place.keeper, place.study_id, 1, reason=" ", now=NOW)
    with pytest.raises(NotFound, match="has no run 99; choose one of its run order"):
        skip_run(place.database, place.keeper, place.study_id, 99, reason="x", now=NOW)
    viewer = somebody_in(place.database, place.keeper, place.series_id, role="viewer")
    with pytest.raises(NotAllowed, match="a viewer may read"):
        skip_run(place.database, viewer, place.study_id, 1, reason="x", now=NOW)


def test_each_block_has_its_own_next_run(database: Database) -> None:
    place = in_order(a_study(database, factors=(WALK, START, SHIFT), started=False))

    for shift in ("early", "late"):
        following = state(place, block=shift).following
        assert following is not None
        assert following.levels["shift"] == shift


def test_an_order_longer_than_people_work_through_is_not_drawn(database: Database) -> None:
    place = in_order(a_study(database, started=False), per_cell="4000")

    assert log_sheet(place.database, place.keeper, place.study_id).order is None
