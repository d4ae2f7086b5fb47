"""How many studies show it, against the method sheet and the reference library."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from registry.synthesis.partial_conjunction import at_least, count_shown, discovery_adjusted

# Method sheet 8.1: five studies, and the combined evidence of at least u of them by Fisher.
FIVE = (0.63, 0.001, 0.21, 0.012, 0.004)


@pytest.mark.parametrize(("studies", "expected"), [(1, 4e-5), (2, 0.00235), (3, 0.0448), (4, 0.400), (5, 0.63)])
def test_the_evidence_for_at_least_so_many_studies(studies: int, expected: float) -> None:
    assert at_least(FIVE, studies) == pytest.approx(expected, rel=2e-3, abs=5e-6)


def test_two_of_three_one_sided_studies() -> None:
    # Method sheet 8.1: three studies of 7.4, u = 2: .00180; u = 3: .0432.
    p = (0.00433, 0.0000791, 0.0432)
    assert at_least(p, 2) == pytest.approx(0.00180, abs=1e-5)
    assert at_least(p, 3) == pytest.approx(0.0432, abs=5e-5)


@pytest.mark.parametrize("studies", [1, 2, 3])
def test_combining_agrees_with_the_reference_library(studies: int) -> None:
    rest = sorted(FIVE)[studies - 1 :]
    assert at_least(FIVE, studies) == pytest.approx(stats.combine_pvalues(rest, method="fisher").pvalue, rel=1e-12)


def test_three_of_the_five_show_it() -> None:
    assert count_shown(FIVE, alpha=0.05) == 3


def test_no_study_shows_what_none_shows() -> None:
    assert count_shown((1.0, 1.0, 0.4), alpha=0.05) == 0
    assert count_shown((), alpha=0.05) == 0


def test_a_chance_of_zero_counts_as_the_smallest_one_that_can_be_told() -> None:
    assert count_shown((0.0, 0.0, 1.0), alpha=0.05) == 2


def test_adjusting_for_false_discoveries_agrees_with_the_method_sheet() -> None:
    # Method sheet 4.4, and scipy.stats.false_discovery_control.
    p = (0.001, 0.008, 0.039, 0.041, 0.042, 0.06, 0.074, 0.205)
    expected = (0.008, 0.032, 0.0672, 0.0672, 0.0672, 0.08, 0.0846, 0.205)

    assert discovery_adjusted(p) == pytest.approx(expected, abs=5e-5)
    assert discovery_adjusted(p) == pytest.approx(stats.false_discovery_control(p), rel=1e-12)


@given(st.lists(st.floats(0, 1), min_size=1, max_size=12), st.randoms(use_true_random=False))
def test_the_order_of_studies_does_not_matter(p: list[float], order: object) -> None:
    shuffled = list(p)
    order.shuffle(shuffled)  # type: ignore[attr-defined]

    assert count_shown(shuffled, alpha=0.05) == count_shown(p, alpha=0.05)
    assert sorted(discovery_adjusted(shuffled)) == pytest.approx(sorted(discovery_adjusted(p)))
