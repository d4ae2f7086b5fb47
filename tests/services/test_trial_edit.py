"""A trial is put right with a reason, and every change stays to be read."""

from __future__ import annotations

import pytest

from registry.errors import InputRefused, NotAllowed, NotFound, NotNow, ReadingRefused
from registry.services.opening import Database
from registry.services.people import add_person, grant
from registry.services.study_card import study_card
from registry.services.trial_edit import (
    change_step,
    correct_reading,
    restore_reading,
    restore_trial,
    set_aside_reading,
    set_aside_trial,
)
from registry.services.trial_pages import trial_detail, trial_list
from registry.services.upkeep import recount
from registry.storage.frame import fetch_frame
from registry.storage.tallies import fetch_tallies
from registry.trials.tallies import Tally
from tests.support.studies import CHEAP, MINUTES, NOW, PASSWORD, WRONG_PICK, Place, a_study

BACK = {"walk": "return", "start": "back"}


@pytest.fixture
def place(database: Database) -> Place:
    """Make a study with two responses and two trials: 7.1 and 7.4 minutes, the second with a wrong pick."""
    place = a_study(database, responses=(MINUTES, WRONG_PICK))
    place.log(BACK, {"minutes": "7.1"}, key=1)
    place.log(BACK, {"minutes": "7.4", "wrong pick": "yes"}, key=2)
    return place


def tally(place: Place, response: str = "minutes") -> Tally:
    with place.database.read() as session:
        frame = fetch_frame(session, place.study_id)
        found = frame.response(response)
        assert found is not None
        (only,) = fetch_tallies(session, place.study_id, found.response_id).values()
    assert recount(place.database).faults == ()
    return only


def readings(place: Place, number: int) -> dict[str, tuple[str, bool]]:
    shown = trial_detail(place.database, place.keeper, place.study_id, number).trial
    return {reading.response: (reading.text, reading.kept) for reading in shown.readings}


def test_a_correction_moves_the_tally_by_exactly_its_difference(place: Place) -> None:
    correct_reading(
        place.database, place.keeper, place.study_id, 2, response="minutes", text="7.6", reason="misread", now=NOW
    )

    assert tally(place) == Tally(2, 5, 25)
    assert readings(place, 2)["minutes"] == ("7.6", True)
    newest = trial_detail(place.database, place.keeper, place.study_id, 2).history[0]
    assert (newest.what, newest.before, newest.after, newest.reason) == ("reading_corrected", "7.4", "7.6", "misread")


def test_the_first_reading_may_be_corrected_and_the_anchor_stays(place: Place) -> None:
    correct_reading(
        place.database, place.keeper, place.study_id, 1, response="minutes", text="8.1", reason="misread", now=NOW
    )

    assert tally(place) == Tally(2, 13, 109)


def test_a_reading_left_out_can_be_added_later(place: Place) -> None:
    correct_reading(
        place.database,
        place.keeper,
        place.study_id,
        1,
        response="wrong pick",
        text="no",
        reason="slip came late",
        now=NOW,
    )

    assert readings(place, 1)["wrong pick"] == ("no", True)
    assert tally(place, "wrong pick") == Tally(2, -1, 1)


def test_a_trial_set_aside_leaves_the_tallies_and_comes_back_whole(place: Place) -> None:
    set_aside_trial(place.database, place.keeper, place.study_id, 2, reason="aisle blocked", now=NOW)
    aside = tally(place)
    restore_trial(place.database, place.keeper, place.study_id, 2, reason="it was open", now=NOW)

    assert aside == Tally(1, 0, 0)
    assert tally(place) == Tally(2, 3, 9)
    assert trial_list(place.database, place.keeper, place.study_id, which="set_aside").total == 0


def test_one_reading_set_aside_leaves_the_others_in(place: Place) -> None:
    set_aside_reading(
        place.database, place.keeper, place.study_id, 2, response="minutes", reason="watch stopped", now=NOW
    )

    assert tally(place) == Tally(1, 0, 0)
    assert tally(place, "wrong pick") == Tally(1, 0, 0)
    assert readings(place, 2)["minutes"] == ("7.4", False)
    assert trial_list(place.database, place.keeper, place.study_id, which="set_aside").total == 1


def test_a_reading_set_aside_within_a_trial_set_aside_stays_out_when_the_trial_returns(place: Place) -> None:
    args = (place.database, place.keeper, place.study_id, 2)
    set_aside_trial(*args, reason="aisle blocked", now=NOW)
    set_aside_reading(*args, response="minutes", reason="watch stopped", now=NOW)
    restore_trial(*args, reason="it was open", now=NOW)
    out = tally(place)
    restore_reading(*args, response="minutes", reason="watch was right", now=NOW)

    assert out == Tally(1, 0, 0)
    assert tally(place) == Tally(2, 3, 9)


def test_a_finer_step_keeps_every_number_exactly(place: Place) -> None:
    change_step(
        place.database, place.keeper, place.study_id, response="minutes", step="0.05", reason="new watch", now=NOW
    )
    place.log(BACK, {"minutes": "7.25"}, key=3)

    assert tally(place) == Tally(3, 6 + 3, 36 + 9)
    assert readings(place, 2)["minutes"] == ("7.40", True)
    response = study_card(place.database, place.keeper, place.study_id).responses[0]
    assert response.step == "0.05"


@pytest.mark.parametrize("step", ["0.2", "0.1", "0.03", "0", "-0.01", "fine"])
def test_a_step_that_would_move_a_reading_is_refused(place: Place, step: str) -> None:
    with pytest.raises(InputRefused, match="step"):
        change_step(place.database, place.keeper, place.study_id, response="minutes", step=step, reason="x", now=NOW)

    assert tally(place) == Tally(2, 3, 9)


def test_a_step_that_would_break_the_bound_is_refused_with_its_reason(place: Place) -> None:
    with pytest.raises(InputRefused, match=r"readings would lie \d+ steps from the first one; at most 68719476736"):
        change_step(
            place.database, place.keeper, place.study_id, response="minutes", step="0.000000000001", reason="x", now=NOW
        )


@pytest.mark.parametrize("reason", ["", "   ", "x" * 501])
def test_every_change_needs_a_reason(place: Place, reason: str) -> None:
    with pytest.raises(InputRefused, match="say why, in 1 to 500 characters"):
        set_aside_trial(place.database, place.keeper, place.study_id, 1, reason=reason, now=NOW)


def test_what_does_not_fit_is_refused_with_its_place(place: Place) -> None:
    args = (place.database, place.keeper, place.study_id)

    with pytest.raises(NotFound, match="Walk and start has no trial 9"):
        set_aside_trial(*args, 9, reason="x", now=NOW)
    with pytest.raises(NotNow, match="trial 1: it is counted already"):
        restore_trial(*args, 1, reason="x", now=NOW)
    with pytest.raises(NotFound, match="trial 1: it has no reading of wrong pick"):
        set_aside_reading(*args, 1, response="wrong pick", reason="x", now=NOW)
    with pytest.raises(InputRefused, match="no response 'metres'; its responses are minutes, wrong pick"):
        correct_reading(*args, 1, response="metres", text="7", reason="x", now=NOW)
    with pytest.raises(InputRefused, match=r"trial 1, minutes: it already reads 7\.1"):
        correct_reading(*args, 1, response="minutes", text="7.10", reason="x", now=NOW)
    with pytest.raises(ReadingRefused, match="check the unit"):
        correct_reading(*args, 1, response="minutes", text="9999999999", reason="x", now=NOW)


def test_a_logger_may_not_correct(place: Place) -> None:
    logger = add_person(
        place.database, name="Lo", address="lo@example.org", password=PASSWORD, keeper=False, now=NOW, hashing=CHEAP
    )
    grant(place.database, place.keeper, place.series_id, address="lo@example.org", role="logger", now=NOW)

    with pytest.raises(NotAllowed, match="analyst"):
        set_aside_trial(place.database, logger, place.study_id, 1, reason="x", now=NOW)
