"""How many trials an interval of some width takes."""

from __future__ import annotations

import pytest
from scipy import stats

from registry.errors import InputRefused
from registry.planning.precision import trials_for_precision, upper_bound_of_spread


def test_an_offset_of_three_levels_within_one_and_a_half_takes_three_trials_each() -> None:
    # Method sheet 6.2: offset of a 3-level factor, H = 1.5, sigma = 3, M = 12 gives r = 3. With 12 cells an
    # offset's squared coefficients sum to (1/12)² · (4 · 2² + 8 · 1²) = 1/6.
    assert trials_for_precision(1.5, sd=3.0, squares=1 / 6, combinations=12) == 3


def test_the_bound_of_a_spread_on_twenty_degrees_of_freedom() -> None:
    # Method sheet 6.2: × 1.171 at 20 degrees of freedom, 80 %.
    assert upper_bound_of_spread(1.0, 20) == pytest.approx(1.171, abs=5e-4)


@pytest.mark.parametrize("half_width", [0.05, 0.3, 0.8, 5.0])
def test_one_trial_fewer_would_not_do(half_width: float) -> None:
    trials = trials_for_precision(half_width, sd=1.3, squares=4.0, combinations=6)

    def reach(each: int) -> float:  # Student's t of the reference library, not ours.
        return float(stats.t.ppf(0.975, 6 * (each - 1)) * 1.3 * (4.0 / each) ** 0.5)

    assert reach(trials) <= half_width
    assert trials == 2 or reach(trials - 1) > half_width


@pytest.mark.parametrize(
    ("name", "values"), [("half-width", (0.0, 1.0, 1.0)), ("standard deviation", (1.0, -1.0, 1.0))]
)
def test_what_is_not_above_zero_is_refused(name: str, values: tuple[float, float, float]) -> None:
    half_width, sd, squares = values
    with pytest.raises(InputRefused, match=f"{name}: .* given; give a number above 0"):
        trials_for_precision(half_width, sd=sd, squares=squares, combinations=4)


def test_a_width_that_no_study_reaches_is_refused() -> None:
    with pytest.raises(InputRefused, match="1000000 trials would not reach it"):
        trials_for_precision(1e-9, sd=1.0, squares=1.0, combinations=4)
