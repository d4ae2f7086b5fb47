"""What a plan can lean on: earlier studies, and how sure so many trials would be."""

from __future__ import annotations

from math import sqrt

import pytest
from scipy import stats

from registry.services.opening import Database
from registry.services.plan_outlook import plan_outlook
from registry.services.study_start import FactorDraft, ResponseDraft
from tests.support.studies import (
    SHIFT,
    START,
    WALK,
    Place,
    a_study,
    another_study,
    close_a_study,
    even_readings,
)

SECONDS = ResponseDraft("minutes", "minutes per tour", "s", "1", "48", "lower", "measured", "primary")
NO_MARGIN = ResponseDraft("minutes", "minutes per tour", "min", "0.1", "", "lower", "measured", "primary")
EVEN = even_readings((WALK.levels, START.levels), lambda _: 20.0, per_cell=6, noise=0.4)


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def test_earlier_studies_of_the_same_factors_are_named_with_what_they_found(place: Place) -> None:
    winter = close_a_study(place, title="Winter", readings=EVEN)
    crew = FactorDraft("crew", "treatment", ("a", "b"))
    close_a_study(place, title="Crews", factors=(crew,), readings=even_readings((crew.levels,), lambda _: 20.0))
    planned = another_study(place.database, place.keeper, place.series_id, title="Next", started=False)

    found = plan_outlook(place.database, place.keeper, planned).earlier

    assert [(study.title, study.status, study.shared) for study in found] == [
        ("Walk and start", "running", ("walk", "start")),
        ("Winter", "closed", ("walk", "start")),
    ]
    assert found[1].id == winter
    assert found[1].headline is not None


def test_the_reach_of_an_interval_is_that_of_students_t(place: Place) -> None:
    close_a_study(place, title="Winter", readings=EVEN)
    planned = another_study(place.database, place.keeper, place.series_id, title="Next", started=False)

    found = plan_outlook(place.database, place.keeper, planned).precision

    assert found is not None
    assert (found.sd_from, found.contrasts) == ("Winter", ("walk", "start", "walk × start"))
    # Six cells of six readings at .4 either side: sum of squares 6 · 6 · .16 on 30 degrees of freedom, and the bound
    # s · √(df / χ²(.2; df)) of the method sheet 6.2; quantiles of the reference library.
    sd = sqrt(36 * 0.16 / 30) * sqrt(30 / stats.chi2.ppf(0.2, 30))
    assert found.sd == pytest.approx(sd, rel=1e-9)
    line = next(line for line in found.lines if line.trials == 8)
    quantile = stats.t.ppf(0.975, 6 * 7)
    # A level of walk averages 2 cells, one of start 3, a corner of their square 1.
    assert line.total == 48
    assert line.half_widths == pytest.approx(
        [quantile * sd * sqrt(squares / 8) for squares in (2 / 2, 2 / 3, 4 / 1)], rel=1e-9
    )


def test_the_size_wanted_is_the_smallest_within_the_margin(place: Place) -> None:
    close_a_study(place, title="Winter", readings=EVEN)
    planned = another_study(place.database, place.keeper, place.series_id, title="Next", started=False)

    found = plan_outlook(place.database, place.keeper, planned).precision

    assert found is not None
    for wanted, squares in zip(found.wanted, (1.0, 2 / 3, 4.0), strict=True):
        reach = [stats.t.ppf(0.975, 6 * (n - 1)) * found.sd * sqrt(squares / n) for n in (wanted - 1, wanted)]
        assert reach[1] <= 0.8
        assert wanted == 2 or reach[0] > 0.8


def test_blocks_add_cells_and_a_spread_in_seconds_is_told_in_minutes(place: Place) -> None:
    close_a_study(
        place, title="Seconds", responses=(SECONDS,),
        readings=even_readings((WALK.levels, START.levels), lambda _: 1200.0, noise=24, places=0),
    )  # fmt: skip
    planned = another_study(
        place.database, place.keeper, place.series_id, title="Next", factors=(WALK, START, SHIFT), started=False
    )

    found = plan_outlook(place.database, place.keeper, planned).precision

    assert found is not None
    assert found.unit == "min"
    assert found.sd == pytest.approx(sqrt(36 * 0.16 / 30) * sqrt(30 / stats.chi2.ppf(0.2, 30)), rel=1e-9)
    assert found.lines[0].total == 24


def test_without_a_spread_or_a_margin_it_says_why_nothing_is_said(place: Place) -> None:
    planned = another_study(place.database, place.keeper, place.series_id, title="Next", started=False)
    assert plan_outlook(place.database, place.keeper, planned).why_no_precision == (
        "No closed study of this series has read minutes, so its spread is not known yet."
    )
    close_a_study(place, title="Still", readings=even_readings((WALK.levels, START.levels), lambda _: 20.0, noise=0.0))
    assert plan_outlook(place.database, place.keeper, planned).why_no_precision == (
        "No closed study shows a spread to plan with."
    )
    bare = another_study(
        place.database, place.keeper, place.series_id, title="Bare", responses=(NO_MARGIN,), started=False
    )
    assert plan_outlook(place.database, place.keeper, bare).why_no_precision == (
        "No measured response states a margin that matters."
    )
