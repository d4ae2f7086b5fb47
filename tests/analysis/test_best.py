"""Which of several means is best, against the method sheet and a simulation."""

from __future__ import annotations

import numpy as np
import pytest

from registry.analysis.best import compare_with_best, critical_value
from registry.errors import InputRefused

# Method sheet 4.86: means, trials, s² = 4 on 20 degrees of freedom, larger is better.
MEANS, COUNTS, S2, DF = (12.1, 14.8, 14.1, 10.2), (6, 5, 7, 6), 4.0, 20.0


@pytest.mark.parametrize(("comparisons", "df", "expected"), [(3, 20, 2.19228), (5, 30, 2.33518), (2, 12, 2.10806)])
def test_the_critical_value_of_equal_counts_is_that_of_the_published_table(
    comparisons: int, df: int, expected: float
) -> None:
    # Method sheet 4.86; Dunnett 1955, table 1a: 2.19 for three comparisons on 20 (from memory).
    found = critical_value((0.5**0.5,) * comparisons, df, 0.95)

    assert found == pytest.approx(expected, abs=5e-6)


def test_the_worked_numbers_of_the_method_sheet() -> None:
    found = compare_with_best(MEANS, [S2 / n for n in COUNTS], df=[DF] * 4)

    assert [each.upper for each in found] == pytest.approx([0, 3.24706, 1.88365, 0], abs=5e-6)
    assert [each.lower for each in found] == pytest.approx([-5.33402, -1.88365, -3.24706, -7.23402], abs=5e-6)
    assert [each.may_be_best for each in found] == [False, True, True, False]


def test_one_that_stands_far_above_is_the_best() -> None:
    found = compare_with_best([10.0, 20.0, 11.0], [0.1, 0.1, 0.1], df=[30.0] * 3)

    assert [each.may_be_best for each in found] == [False, True, False]
    assert found[1].lower == 0.0
    assert found[1].upper > 7


def test_equal_means_cannot_be_told_apart() -> None:
    found = compare_with_best([5.0, 5.0], [1.0, 1.0], df=[10.0, 10.0])

    assert all(each.may_be_best for each in found)
    assert found[0].upper == pytest.approx(-found[0].lower)


def test_all_intervals_hold_at_once_as_often_as_promised() -> None:
    # Truth 0, .5, .5, -1 (method sheet: .994 of runs); never less than 95 in 100 but for chance.
    truth, counts = np.array([0.0, 0.5, 0.5, -1.0]), np.array([6, 5, 7, 6])
    rng = np.random.default_rng(20261201)
    df = int(counts.sum() - 4)
    held = 0
    runs = 400
    for _ in range(runs):
        s2 = 4.0 * rng.chisquare(df) / df
        means = rng.normal(truth, 2.0 / np.sqrt(counts))
        found = compare_with_best(means.tolist(), (s2 / counts).tolist(), df=[float(df)] * 4)
        distance = [truth[at] - np.delete(truth, at).max() for at in range(4)]
        held += all(each.lower <= true <= each.upper for each, true in zip(found, distance, strict=True))
    # 400 runs at .95 have a standard error of .011.
    assert held / runs > 0.95 - 3 * 0.011


@pytest.mark.parametrize(
    ("means", "variances", "told"),
    [
        ([1.0], [1.0], "means: 1 given; give at least two"),
        ([1.0, 2.0], [1.0, 0.0], "variances: 0.0 given; give numbers"),
    ],
)
def test_what_cannot_be_compared_is_refused(means: list[float], variances: list[float], told: str) -> None:
    with pytest.raises(InputRefused, match=told):
        compare_with_best(means, variances, df=[10.0] * len(means))
