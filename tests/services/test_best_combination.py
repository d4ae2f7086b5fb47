"""Which combination to run, as a study that reached its size says it."""

from __future__ import annotations

import pytest

from registry.services.best_combination import BestCombination
from registry.services.opening import Database
from registry.services.study_report import study_report
from registry.services.study_start import FactorDraft, ResponseDraft
from tests.support.studies import MINUTES, SHIFT, START, WALK, Place, a_study, close_a_study, even_readings

HIGHER = ResponseDraft("lines", "lines an hour", "count", "1", "5", "higher", "measured", "primary")
NEITHER = ResponseDraft("lines", "lines an hour", "count", "1", "5", "none", "measured", "primary")
EFFECT = {"serpentine": 2.0, "largest gap": 0.0, "return": 3.0, "front": 0.0, "back": 1.0}


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def best(place: Place, response: ResponseDraft = MINUTES, **more: object) -> BestCombination:
    factors = more.pop("factors", (WALK, START))
    readings = even_readings(
        [factor.levels for factor in factors],  # type: ignore[attr-defined]
        lambda levels: 20.0 + sum(EFFECT.get(level, 0.0) for level in levels),
        places=0 if response.step == "1" else 1,
        noise=1.0 if response.step == "1" else 0.3,
        **{name: more.pop(name) for name in ("per_cell",) if name in more},  # type: ignore[arg-type]
    )
    study = close_a_study(
        place, title="Winter", factors=factors, responses=(response,), readings=readings, **more,  # type: ignore[arg-type]
    )  # fmt: skip
    report = study_report(place.database, place.keeper, study)
    assert report.findings is not None
    return report.findings.best


def test_lower_is_better_names_the_lowest(place: Place) -> None:
    found = best(place, per_cell=8)

    assert [line.levels for line in found.contenders] == [("largest gap", "front")]
    assert found.sentences[0].startswith(
        "The best of 6 combinations is largest gap, front; the next one is behind it by at most "
    )
    assert found.approximate


def test_higher_is_better_names_the_highest_and_what_cannot_be_ruled_out(place: Place) -> None:
    found = best(place, HIGHER, per_cell=4)

    assert found.contenders[0].levels == ("return", "back")
    assert len(found.contenders) > 1
    assert "cannot be ruled out, and choosing it gives up at most" in found.sentences[0]
    assert found.contenders[0].given_up < found.contenders[-1].given_up


def test_the_shared_spread_is_exact_and_each_its_own_is_told_as_approximate(place: Place) -> None:
    assert not best(place, per_cell=4).approximate


def test_what_names_no_best_says_why(place: Place) -> None:
    assert best(place, NEITHER).why_not == "It was not said which way this response is wanted."


def test_with_blocks_none_is_named_yet(place: Place) -> None:
    found = best(place, factors=(WALK, SHIFT))

    assert found.why_not.startswith("With blocks the best combination is not named yet")
    assert found.contenders == ()


def test_readings_without_spread_name_no_best(place: Place) -> None:
    walk = FactorDraft("walk", "treatment", ("serpentine", "return"))
    readings = {("serpentine",): ["7.1"] * 4, ("return",): ["7.2"] * 4}
    study = close_a_study(place, title="Still", factors=(walk,), readings=readings)

    report = study_report(place.database, place.keeper, study)

    assert report.findings is not None
    assert report.findings.best.why_not == "The readings show no spread to judge by."
    assert report.headline != ""
