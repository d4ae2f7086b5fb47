"""Judging one contrast at any moment, against the method sheet."""

from __future__ import annotations

from math import exp, log, sqrt

import pytest
from scipy import special, stats

from registry.analysis.looks import AnytimeJudgement, anytime, may_speak
from registry.analysis.undefined import Undefined


def judged(estimate: float, **given: float) -> AnytimeJudgement:
    chosen = {"unscaled_variance": 0.1, "mean_square": 4.0, "df": 30.0, "tuning": 0.5, "alpha": 0.05} | given
    found = anytime(estimate, **chosen)
    assert isinstance(found, AnytimeJudgement)
    return found


def test_the_half_width_and_the_chance_at_its_edge() -> None:
    # Method sheet 5.1: nu 30, v .1, tau² .5, s² 4: half-width 2.087722, 1.616 times the ordinary; E there is 20.
    half_width = judged(0.0).half_width

    assert half_width == pytest.approx(2.087722, abs=5e-7)
    assert half_width / (stats.t.ppf(0.975, 30) * sqrt(0.4)) == pytest.approx(1.616, abs=5e-4)
    assert judged(half_width).p == pytest.approx(1 / 20, rel=1e-9)


def test_the_chance_is_one_over_the_evidence() -> None:
    # E as in the method sheet 5.1, written out: r = v / (v + tau²).
    v, tau, s2, nu, estimate = 0.1, 0.5, 4.0, 30.0, 3.0
    r, t2 = v / (v + tau), estimate**2 / (s2 * v)
    log_e = 0.5 * log(r) + 0.5 * (nu + 1) * (log(1 + t2 / nu) - log(1 + r * t2 / nu))

    assert judged(estimate).p == pytest.approx(exp(-log_e), rel=1e-12)
    assert judged(0.0).p == 1.0


def test_the_tuning_of_a_plan_is_the_lambert_value_of_the_method_sheet() -> None:
    # Method sheet 5.3: -W₋₁(-alpha²/e) - 1 = 8.212 at .05; the price at the planned end is 1.571 at 60 df.
    tuning = -special.lambertw(-(0.05**2) / exp(1), -1).real - 1

    assert tuning == pytest.approx(8.212, abs=5e-4)
    found = judged(0.0, unscaled_variance=1.0, mean_square=1.0, df=60.0, tuning=tuning)
    assert found.half_width / stats.t.ppf(0.975, 60) == pytest.approx(1.571, abs=2e-3)


def test_too_few_trials_have_no_interval() -> None:
    assert anytime(1.0, unscaled_variance=1.0, mean_square=1.0, df=1.0, tuning=0.01, alpha=0.05) == Undefined(
        "closed before its size, and too few trials for an interval that holds at any moment"
    )


@pytest.mark.parametrize(
    ("df", "counts", "in_order", "speaks"),
    [
        (20, (3, 3), True, True), (19, (3, 3), True, False), (40, (2, 9), True, False),
        (40, (19, 30), False, False), (40, (20, 30), False, True), (100, (), True, False),
    ],
)  # fmt: skip
def test_when_it_may_speak(df: float, counts: tuple[int, ...], *, in_order: bool, speaks: bool) -> None:
    # The rule of the method sheet, 5.4.
    assert may_speak(df, counts, in_order=in_order) is speaks
