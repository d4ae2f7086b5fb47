"""One effect pooled over studies, against published sets and closed forms."""

from __future__ import annotations

import csv
import json
from math import inf, nan
from pathlib import Path
from typing import Any, get_args

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from registry.analysis.undefined import Undefined
from registry.errors import InputRefused
from registry.synthesis.pooling import IntervalKind, Method, Pooled, leave_one_out, pool

META = Path(__file__).parents[1] / "reference" / "meta"
SETS = ("bcg", "normand1999", "hackshaw1998", "raudenbush1985")
METHODS: tuple[Method, ...] = get_args(Method)
# Reference key of each kind of interval: the call that asks for it.
INTERVALS: dict[str, tuple[IntervalKind, bool]] = {
    "normal": ("normal", True),
    "hartung_knapp": ("hartung-knapp", False),
    "hartung_knapp_floored": ("hartung-knapp", True),
}


def reference(name: str) -> tuple[list[float], list[float], dict[str, Any]]:
    with (META / f"{name}.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    expected = json.loads((META / f"{name}.json").read_text(encoding="utf-8"))
    return [float(row["effect"]) for row in rows], [float(row["variance"]) for row in rows], expected


def close(value: object, expected: float) -> bool:
    return isinstance(value, float) and value == pytest.approx(expected, rel=1e-8, abs=1e-12)


@pytest.mark.parametrize("interval", INTERVALS)
@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("name", SETS)
def test_pooled_values_agree_with_the_published_sets(name: str, method: Method, interval: str) -> None:
    # tests/reference/meta, computed with R (metafor); see the README there.
    effects, variances, expected = reference(name)
    kind, floor = INTERVALS[interval]

    found = pool(effects, variances, method=method, interval=kind, floor=floor)

    wanted = expected["pooled"][method]
    assert close(found.estimate, wanted["estimate"])
    assert found.weights == pytest.approx(wanted["weights"], rel=1e-8)
    for field in ("se", "p", "lower", "upper"):
        assert close(getattr(found, field), wanted[interval][field]), field
    if method != "common":
        assert close(found.tau_squared.estimate, wanted["tau_squared"])
    if method != "common" and interval != "hartung_knapp_floored":
        low, high = wanted["prediction"]["normal" if interval == "normal" else "hartung_knapp"]
        assert close(found.prediction.lower, low)
        assert close(found.prediction.upper, high)


@pytest.mark.parametrize("name", SETS)
def test_how_studies_differ_agrees_with_the_published_sets(name: str) -> None:
    effects, variances, expected = reference(name)

    found = pool(effects, variances)

    assert close(found.q.value, expected["q"]["value"])
    assert found.q.df == expected["q"]["df"]
    assert close(found.q.p, expected["q"]["p"])
    assert close(found.i_squared, expected["i_squared"])
    low, high = expected["tau_squared_interval"]
    assert close(found.tau_squared.lower, low)
    assert close(found.tau_squared.upper, high)


@pytest.mark.parametrize("method", ["common", "dersimonian-laird", "reml"])
@pytest.mark.parametrize("name", SETS)
def test_leaving_each_study_out_agrees_with_the_published_sets(name: str, method: Method) -> None:
    effects, variances, expected = reference(name)

    found = leave_one_out(effects, variances, method=method, interval="normal")

    for left, wanted in zip(found, expected["leave_one_out"], strict=True):
        assert close(left.estimate, wanted[method]["estimate"])
        assert close(left.lower, wanted[method]["lower"])
        assert close(left.upper, wanted[method]["upper"])


def test_leaving_each_study_out_is_a_pool_of_the_rest() -> None:
    effects, variances, _ = reference("bcg")

    for left in leave_one_out(effects, variances):
        at = left.without
        rest = pool([*effects[:at], *effects[at + 1 :]], [*variances[:at], *variances[at + 1 :]])
        assert (left.estimate, left.lower, left.upper) == (rest.estimate, rest.lower, rest.upper)


def test_three_small_studies_agree_with_the_method_sheet() -> None:
    # Method sheet 7.4, small check: y = 2.1, 3.4, 1.2 with se .8, .9, .7.
    effects, variances = [2.1, 3.4, 1.2], [0.64, 0.81, 0.49]

    found = pool(effects, variances)

    assert found.tau_squared.estimate == pytest.approx(0.561008, abs=5e-7)
    assert found.estimate == pytest.approx(2.1366, abs=5e-5)
    assert pool(effects, variances, interval="normal").se == pytest.approx(0.6308, abs=5e-5)
    assert _half_width(found) == pytest.approx(2.7139, abs=5e-4)
    assert _half_width(pool(effects, variances, interval="normal")) == pytest.approx(1.2363, abs=5e-5)
    assert pool(effects, variances, method="dersimonian-laird").tau_squared.estimate == pytest.approx(
        0.547423, abs=5e-7
    )
    assert pool(effects, variances, method="reml").tau_squared.estimate == pytest.approx(0.545121, abs=5e-7)
    common = pool(effects, variances, method="common", interval="normal")
    assert (common.estimate, common.se) == (pytest.approx(2.0521, abs=5e-5), pytest.approx(0.4546, abs=5e-5))
    assert (found.q.value, found.q.p) == (pytest.approx(3.7284, abs=5e-5), pytest.approx(0.1550, abs=5e-5))
    assert found.tau_squared.lower == 0.0
    assert found.tau_squared.upper == pytest.approx(47.65, abs=5e-3)
    assert found.notes == ("three studies: the prediction rests on one degree of freedom and is very wide",)


def _half_width(found: Pooled) -> float:
    assert isinstance(found.upper, float)
    return found.upper - found.estimate


def test_three_cycles_of_an_interaction_pool_to_their_average_with_a_known_spread() -> None:
    # Worked example A: interaction .15, 1.50, .25 a cycle with sigma .58; Q 3.364 on 2, p .186, tau² .229, se .434.
    found = pool([0.15, 1.50, 0.25], [0.58**2] * 3, method="dersimonian-laird", interval="normal")

    assert found.estimate == pytest.approx(0.633, abs=5e-4)
    assert (found.q.value, found.q.p) == (pytest.approx(3.364, abs=1e-3), pytest.approx(0.186, abs=5e-4))
    assert found.tau_squared.estimate == pytest.approx(0.229, abs=5e-4)
    assert found.se == pytest.approx(0.434, abs=5e-4)


def test_one_study_is_its_own_pool_and_says_what_it_cannot() -> None:
    found = pool([1.5], [0.25])

    assert (found.estimate, found.se, found.weights) == (1.5, 0.5, (1.0,))
    for undefined in (found.lower, found.p, found.tau_squared.estimate, found.i_squared, found.q.value):
        assert undefined == Undefined("one study cannot show how studies differ")
    assert found.prediction.lower == Undefined("a prediction needs three studies")


def test_two_studies_have_an_interval_and_no_prediction() -> None:
    found = pool([1.0, 2.0], [0.5, 0.5])

    # Equal variances: the mean, and half the squared difference is Q, below its one degree of freedom: tau² is 0.
    # t(.975; 1) = 12.7062 (any table of Student's t), se = √(.5/2), the floor holds.
    assert (found.estimate, found.tau_squared.estimate) == (1.5, 0.0)
    assert _half_width(found) == pytest.approx(12.7062047 * 0.5, rel=1e-7)
    assert isinstance(found.prediction.upper, Undefined)


def test_effects_that_agree_exactly_differ_by_nothing() -> None:
    found = pool([0.7, 0.7, 0.7, 0.7], [0.1, 0.2, 0.3, 0.4])

    assert found.tau_squared.estimate == 0.0
    assert found.i_squared == 0.0
    assert found.q.value == pytest.approx(0.0, abs=1e-28)
    assert found.estimate == pytest.approx(0.7, rel=1e-15)


@pytest.mark.parametrize("method", METHODS)
def test_a_negative_variance_between_studies_is_never_given(method: Method) -> None:
    # Variety by year of worked example C has a negative component; effects this close have one too.
    found = pool([1.0, 1.01, 0.99], [1.0, 1.0, 1.0], method=method)

    assert found.tau_squared.estimate in (0.0, Undefined("one common effect is assumed, so studies do not differ"))


@pytest.mark.parametrize(
    ("effects", "variances", "told"),
    [
        ([], [], "studies: none given; give at least one"),
        ([1.0, 2.0], [1.0], "studies: 2 effects and 1 variances given; give one of each a study"),
        ([1.0, 2.0], [1.0, 0.0], r"row 2, variance: 0\.0 given; give a finite number above 0"),
        ([1.0, 2.0], [-1.0, 1.0], r"row 1, variance: -1\.0 given"),
        ([1.0, 2.0], [1.0, nan], "row 2, variance: nan given"),
        ([inf, 2.0], [1.0, 1.0], "row 1, effect: inf given; give a finite number"),
    ],
)
def test_what_cannot_be_pooled_is_refused_with_its_row(effects: list[float], variances: list[float], told: str) -> None:
    with pytest.raises(InputRefused, match=told):
        pool(effects, variances)


def test_choices_that_do_not_exist_are_refused_with_those_that_do() -> None:
    with pytest.raises(
        InputRefused, match="method: 'best' given; choose paule-mandel, dersimonian-laird, reml, common"
    ):
        pool([1.0], [1.0], method="best")  # type: ignore[arg-type]
    with pytest.raises(InputRefused, match="interval: 'wide' given; choose hartung-knapp, normal"):
        pool([1.0], [1.0], interval="wide")  # type: ignore[arg-type]
    with pytest.raises(InputRefused, match="confidence: 95 given; give a number between 0 and 1"):
        pool([1.0], [1.0], confidence=95)
    with pytest.raises(InputRefused, match="studies: 1 given; give at least two to leave one out"):
        leave_one_out([1.0], [1.0])


STUDIES = st.lists(st.tuples(st.floats(-50, 50), st.floats(0.01, 20)), min_size=2, max_size=8)


@given(STUDIES, st.randoms(use_true_random=False), st.floats(-100, 100), st.sampled_from(METHODS))
@settings(deadline=None, max_examples=60)
def test_order_does_not_matter_and_a_shift_only_shifts(
    studies: list[tuple[float, float]], order: Any, shift: float, method: Method
) -> None:
    shuffled = list(studies)
    order.shuffle(shuffled)

    def pooled(some: list[tuple[float, float]], by: float = 0.0) -> Pooled:
        return pool([effect + by for effect, _ in some], [variance for _, variance in some], method=method)

    first, second, moved = pooled(studies), pooled(shuffled), pooled(studies, shift)
    assert second.estimate == pytest.approx(first.estimate, rel=1e-6, abs=1e-6)
    assert second.se == pytest.approx(first.se, rel=1e-5, abs=1e-6)
    assert moved.estimate == pytest.approx(first.estimate + shift, rel=1e-6, abs=1e-5)
    assert sum(first.weights) == pytest.approx(1.0)
