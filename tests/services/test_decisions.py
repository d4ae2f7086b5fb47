"""What was decided on a study, and whether it held."""

from __future__ import annotations

from datetime import date

import pytest

from registry.errors import InputRefused, NotAllowed, NotFound, NotNow
from registry.services.decisions import DecisionDraft, DecisionShown, decide, say_whether_it_held, study_decisions
from registry.services.history import study_history
from registry.services.opening import Database
from registry.services.upkeep import recount
from tests.support.studies import NOW, START, WALK, Place, a_study, close_a_study, even_readings
from tests.support.visitors import a_visitor, an_app, somebody_in, words_of

DRAFT = DecisionDraft("Walk by the largest gap.", "2026-03-09", "1.5", "min a tour", "2026-06-08")


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


@pytest.fixture
def study(place: Place) -> int:
    return close_a_study(place, title="Winter", readings=even_readings((WALK.levels, START.levels), lambda _: 20.0))


def shown(place: Place, study: int, *, today: date = date(2026, 3, 2)) -> tuple[DecisionShown, ...]:
    return study_decisions(place.database, place.keeper, study, today=today).decisions


def test_a_decision_stands_with_what_it_should_save_and_when_to_look_again(place: Place, study: int) -> None:
    decide(place.database, place.keeper, study, DRAFT, now=NOW)

    (found,) = shown(place, study)
    assert (found.what, found.expected_saving, found.saving_unit) == ("Walk by the largest gap.", "1.5", "min a tour")
    assert (found.from_day, found.review_day) == (date(2026, 3, 9), date(2026, 6, 8))
    assert (found.person, found.held, found.due) == (place.keeper.name, None, False)
    assert shown(place, study, today=date(2026, 6, 8))[0].due
    event = study_history(place.database, place.keeper, study).events[0]
    assert (event.words, event.reason) == ("Decision 1 set down", "Walk by the largest gap.")


def test_whether_it_held_is_said_once(place: Place, study: int) -> None:
    decide(place.database, place.keeper, study, DRAFT, now=NOW)
    here = (place.database, place.keeper, study, 1)

    say_whether_it_held(*here, held="partly", note="not on Mondays", now=NOW)

    (found,) = shown(place, study, today=date(2027, 1, 1))
    assert (found.held, found.held_note, found.due) == ("partly", "not on Mondays", False)
    assert study_history(place.database, place.keeper, study).events[0].words == "Decision 1 looked at again: partly"
    assert recount(place.database).faults == ()
    with pytest.raises(NotNow, match="it was said to hold: partly; set down a new decision instead"):
        say_whether_it_held(*here, held="yes", note="x", now=NOW)


def test_a_decision_is_refused_with_every_fault(place: Place, study: int) -> None:
    draft = DecisionDraft(" ", "soon", "much", "", "2026-13-01")
    with pytest.raises(InputRefused) as refusal:
        decide(place.database, place.keeper, study, draft, now=NOW)
    assert [fault.field for fault in refusal.value.faults] == ["what", "from_day", "review_day", "expected_saving"]
    assert "from: 'soon' given; write the day as 2026-03-02, or leave it empty" in str(refusal.value)
    with pytest.raises(InputRefused, match="2026-01-01 lies before 2026-02-01; give a day after it came into force"):
        decide(place.database, place.keeper, study, DecisionDraft("x", "2026-02-01", "", "", "2026-01-01"), now=NOW)
    with pytest.raises(InputRefused, match="saving, unit: nothing given; say of what, in 1 to 20 characters"):
        decide(place.database, place.keeper, study, DecisionDraft("x", "", "1", "", ""), now=NOW)


def test_deciding_needs_a_closed_study_a_decision_and_the_right_role(place: Place, study: int) -> None:
    with pytest.raises(NotNow, match="it is running; decide on a study once it is closed"):
        decide(place.database, place.keeper, place.study_id, DRAFT, now=NOW)
    with pytest.raises(NotFound, match="has no decision 7; choose one of its list"):
        say_whether_it_held(place.database, place.keeper, study, 7, held="yes", note="x", now=NOW)
    with pytest.raises(InputRefused, match="did it hold: 'maybe' given; choose yes, partly, no"):
        say_whether_it_held(place.database, place.keeper, study, 1, held="maybe", note="x", now=NOW)
    logger = somebody_in(place.database, place.keeper, place.series_id, role="logger")
    with pytest.raises(NotAllowed, match="a logger may log trials"):
        decide(place.database, logger, study, DRAFT, now=NOW)


def test_the_page_keeps_what_was_typed(place: Place, study: int) -> None:
    keeper = a_visitor(an_app(place.database), place.keeper.address)
    address = f"/studies/{study}/decisions"

    refused = keeper.post(address, {"what": "Largest gap", "from_day": "soon"})
    assert refused.status_code == 422
    assert "Largest gap" in refused.text
    assert 'value="soon"' in refused.text
    assert keeper.post(address, {"what": "Largest gap"}).status_code == 303
    unsaid = keeper.post(f"{address}/1/held", {"held": "", "note": "it did"})
    assert unsaid.status_code == 422
    assert "it did" in unsaid.text
    assert keeper.post(f"{address}/1/held", {"held": "yes", "note": "it did"}).status_code == 303
    assert "it held" in words_of(keeper.get(address))
