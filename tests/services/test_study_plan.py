"""A study goes its way: planned, running, closed or withdrawn, each step once and for a reason."""

from __future__ import annotations

import pytest

from registry.errors import AlreadyThere, InputRefused, NotNow
from registry.services.opening import Database
from registry.services.study_card import study_card
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study, withdraw_study
from registry.services.study_start import FactorDraft, ResponseDraft, StudyDraft, new_study
from tests.support.studies import MINUTES, NOW, SHIFT, START, WALK, a_study, another_study


@pytest.mark.parametrize(
    ("per_cell", "block", "spread"), [("5", False, "own"), ("4", False, "shared"), ("9", True, "shared")]
)
def test_the_house_rule_sets_the_spread_from_the_planned_size(
    database: Database, per_cell: str, block: bool, spread: str
) -> None:
    place = a_study(database, factors=(WALK, START, *([SHIFT] if block else [])), started=False)

    lock_plan(database, place.keeper, place.study_id, PlanDraft(per_cell, margins={"minutes": "1.5"}), now=NOW)

    card = study_card(database, place.keeper, place.study_id)
    assert card.plan is not None
    assert (card.plan.spread, card.plan.planned) == (spread, int(per_cell) * card.cells)
    assert card.responses[0].margin == "1.5"
    with pytest.raises(AlreadyThere, match="it is locked already; later changes are amendments"):
        lock_plan(database, place.keeper, place.study_id, PlanDraft("7"), now=NOW)


def test_a_plan_says_everything_that_is_wrong_with_it(database: Database) -> None:
    place = a_study(database, factors=(WALK, START, SHIFT), started=False)

    with pytest.raises(InputRefused) as refusal:
        lock_plan(
            database, place.keeper, place.study_id,
            PlanDraft("many", spread="own", looks="often", margins={"minutes": "0", "metres": "1"}), now=NOW,
        )  # fmt: skip

    fields = [fault.field for fault in refusal.value.faults]
    assert fields == ["per_cell", "spread", "looks", "margins-minutes", None]


def test_a_study_closes_once_and_only_for_a_reason_that_is_true(database: Database) -> None:
    place = a_study(database, started=False)
    lock_plan(database, place.keeper, place.study_id, PlanDraft("1"), now=NOW)
    args = (database, place.keeper, place.study_id)
    with pytest.raises(NotNow, match="Walk and start is planned; only a running study can be closed"):
        close_study(*args, reason="early", note="x", now=NOW)
    start_study(*args, now=NOW)
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)

    with pytest.raises(InputRefused, match="1 of 6 planned trials count; log 5 more where they are missing, or close"):
        close_study(*args, reason="size_reached", note="", now=NOW)
    with pytest.raises(InputRefused, match="note: nothing given; say it in a few words"):
        close_study(*args, reason="early", note=" ", now=NOW)
    close_study(*args, reason="early", note="hall needed", now=NOW)

    card = study_card(database, place.keeper, place.study_id)
    assert (card.status, card.close_reason, card.close_note) == ("closed", "early", "hall needed")
    with pytest.raises(NotNow, match="is closed"):
        withdraw_study(*args, note="x", now=NOW)


def test_the_size_is_reached_only_when_every_combination_has_its_trials(database: Database) -> None:
    place = a_study(database, started=False)
    lock_plan(database, place.keeper, place.study_id, PlanDraft("2"), now=NOW)
    start_study(database, place.keeper, place.study_id, now=NOW)
    cells = [(walk, start) for walk in WALK.levels for start in START.levels]
    for key, (walk, start) in enumerate([*cells, *cells[:-1], *cells[:4]]):
        place.log({"walk": walk, "start": start}, {"minutes": "7.1"}, key=key)

    with pytest.raises(
        InputRefused, match="return, back has 1 of the 2 trials planned of each combination; log 1 more"
    ):
        close_study(database, place.keeper, place.study_id, reason="size_reached", note="", now=NOW)

    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=99)
    close_study(database, place.keeper, place.study_id, reason="size_reached", note="", now=NOW)


def test_a_step_that_no_reading_could_be_kept_on_is_refused(database: Database) -> None:
    place = a_study(database)
    for step in ("1e-30", "1e10"):
        response = ResponseDraft("metres", "", "m", step, "", "lower", "measured", "primary")
        draft = StudyDraft("Next", "", "Hall", "Europe/Copenhagen", (WALK, START), (response,))
        with pytest.raises(InputRefused, match="response metres, step: .* given; give a step from 0.000000001 to 1000"):
            new_study(database, place.keeper, place.series_id, draft, now=NOW)


@pytest.mark.parametrize(("part", "about", "told"), [
    ("guard", "minutes per tour", "part: guard given; this series records it as primary; keep that, or choose another"),
    ("primary", "minutes per line", "what it is: minutes per line given; this series records it as minutes per tour"),
])  # fmt: skip
def test_a_response_keeps_the_part_and_the_meaning_its_series_gave_it(
    database: Database, part: str, about: str, told: str
) -> None:
    place = a_study(database)
    response = ResponseDraft("minutes", about, "min", "0.1", "0.8", "lower", "measured", part)
    draft = StudyDraft("Next", "", "Hall", "Europe/Copenhagen", (WALK, START), (response,))
    with pytest.raises(InputRefused, match=told):
        new_study(database, place.keeper, place.series_id, draft, now=NOW)


def test_a_name_that_turns_the_direction_of_writing_is_refused(database: Database) -> None:
    place = a_study(database)
    draft = StudyDraft("a\u202eb", "", "Hall", "Europe/Copenhagen", (WALK, START), (MINUTES,))
    with pytest.raises(InputRefused, match="title: .* holds a control character; give plain text on one line"):
        new_study(database, place.keeper, place.series_id, draft, now=NOW)


def test_a_new_study_says_everything_that_is_wrong_with_it(database: Database) -> None:
    place = a_study(database)
    draft = StudyDraft(
        title="",
        question="",
        site="x" * 201,
        time_zone="Mars/Olympus",
        factors=(FactorDraft("walk", "treatment", ("a", "A")), FactorDraft("Walk", "held", ("b", "c"))),
        responses=(ResponseDraft("minutes", "", "fathom", "1,5", "-1", "up", "measured", "primary"),),
    )

    with pytest.raises(InputRefused) as refusal:
        new_study(database, place.keeper, place.series_id, draft, now=NOW)

    fields = {fault.field for fault in refusal.value.faults}
    assert fields >= {
        "title", "site", "time_zone", "factors-0-levels", "factors-1-levels", "factors", "responses-0-unit",
        "responses-0-step", "responses-0-margin", "responses-0-wanted",
    }  # fmt: skip


def test_a_response_that_changes_its_meaning_is_refused(database: Database) -> None:
    place = a_study(database)
    changed = ResponseDraft("minutes", "", "m", "1", "", "lower", "measured", "primary")

    with pytest.raises(InputRefused, match="this series records it as time; keep that, or choose another name"):
        another_study(database, place.keeper, place.series_id, title="Second", responses=(changed,))
    again = another_study(database, place.keeper, place.series_id, title="Third", responses=(MINUTES,))
    assert study_card(database, place.keeper, again).factors[0].name == "walk"
