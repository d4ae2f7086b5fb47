"""One effect pooled over studies, against published sets and closed forms."""

from __future__ import annotations

import csv
import json
from math import inf, log, nan
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
    # Relative alone, so that a chance of 1e-47 is compared too; the absolute part is for an expected 0.
    return isinstance(value, float) and value == pytest.approx(expected, rel=1e-8, abs=0.0 if expected else 1e-12)


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
    if kind == "hartung-knapp":
        assert found.df == wanted[interval]["df"]
    if method != "common":
        low, high = wanted["prediction"][_kind_whose_error_holds(interval, wanted)]
        assert close(found.prediction.lower, low)
        assert close(found.prediction.upper, high)


def _kind_whose_error_holds(interval: str, wanted: dict[str, Any]) -> str:
    """Say whose standard error a prediction uses: the floor takes the larger of the other two."""
    if interval != "hartung_knapp_floored":
        return interval
    return max("normal", "hartung_knapp", key=lambda kind: float(wanted[kind]["se"]))


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


def test_the_vaccine_trials_agree_with_the_method_sheet_from_their_counts() -> None:
    # Method sheet 7.4: cases and others with and without the vaccine (Colditz et al. 1994 JAMA 271:698-702), log
    # relative risk; its expected values are those remembered from publication.
    counts = (
        (4, 119, 11, 128), (6, 300, 29, 274), (3, 228, 11, 209), (62, 13536, 248, 12619), (33, 5036, 47, 5761),
        (180, 1361, 372, 1079), (8, 2537, 10, 619), (505, 87886, 499, 87892), (29, 7470, 45, 7232),
        (17, 1699, 65, 1600), (186, 50448, 141, 27197), (5, 2493, 3, 2338), (27, 16886, 29, 17825),
    )  # fmt: skip
    effects = [log(ill / (ill + well) / (bare / (bare + safe))) for ill, well, bare, safe in counts]
    variances = [1 / ill - 1 / (ill + well) + 1 / bare - 1 / (bare + safe) for ill, well, bare, safe in counts]

    def pooled(method: Method, interval: IntervalKind = "normal") -> Pooled:
        return pool(effects, variances, method=method, interval=interval)

    common, dl, reml = pooled("common"), pooled("dersimonian-laird"), pooled("reml")
    assert common.q.value == pytest.approx(152.2330, abs=5e-5)
    assert common.i_squared == pytest.approx(0.9212, abs=5e-5)
    assert common.estimate == pytest.approx(-0.4303, abs=5e-5)
    assert common.se == pytest.approx(0.0405, abs=5e-5)
    assert dl.tau_squared.estimate == pytest.approx(0.308760, abs=5e-7)
    assert dl.estimate == pytest.approx(-0.7141, abs=5e-5)
    assert dl.se == pytest.approx(0.1787, abs=5e-5)
    assert pooled("paule-mandel").tau_squared.estimate == pytest.approx(0.318068, abs=5e-7)
    assert reml.tau_squared.estimate == pytest.approx(0.313243, abs=5e-7)
    assert reml.estimate == pytest.approx(-0.7145, abs=5e-5)
    assert reml.se == pytest.approx(0.1798, abs=5e-5)
    assert reml.tau_squared.lower == pytest.approx(0.1197, abs=5e-5)
    assert reml.tau_squared.upper == pytest.approx(1.1115, abs=5e-5)
    assert reml.prediction.lower == pytest.approx(-2.0084, abs=5e-5)
    assert reml.prediction.upper == pytest.approx(0.5794, abs=1e-4)  # .57931 in the reference file.
    scattered = pooled("reml", "hartung-knapp")
    assert scattered.se == pytest.approx(0.1808, abs=5e-5)
    assert scattered.lower == pytest.approx(-1.1084, abs=5e-5)
    assert scattered.upper == pytest.approx(-0.3206, abs=5e-5)
    assert scattered.prediction.lower == pytest.approx(-2.0090, abs=1e-4)  # -2.00906 in the reference file.
    assert scattered.prediction.upper == pytest.approx(0.5800, abs=5e-5)


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
    assert common.estimate == pytest.approx(2.0521, abs=5e-5)
    assert common.se == pytest.approx(0.4546, abs=5e-5)
    assert found.q.value == pytest.approx(3.7284, abs=5e-5)
    assert found.q.p == pytest.approx(0.1550, abs=5e-5)
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
    assert found.q.value == pytest.approx(3.364, abs=1e-3)
    assert found.q.p == pytest.approx(0.186, abs=5e-4)
    assert found.tau_squared.estimate == pytest.approx(0.229, abs=5e-4)
    assert found.se == pytest.approx(0.434, abs=5e-4)


def test_one_study_is_its_own_pool_and_says_what_it_cannot() -> None:
    found = pool([1.5], [0.25])

    assert (found.estimate, found.se, found.weights) == (1.5, 0.5, (1.0,))
    for undefined in (found.lower, found.p, found.tau_squared.estimate, found.i_squared, found.q.value):
        assert undefined == Undefined("one study cannot show how studies differ")
    assert found.prediction.lower == Undefined("a prediction needs three studies")


def test_one_study_has_a_normal_interval_of_its_own() -> None:
    found = pool([1.5], [0.25], interval="normal")

    # z(.975) = 1.959964 (any table of the normal distribution), se = √.25.
    assert found.upper == pytest.approx(1.5 + 1.959964 * 0.5, abs=1e-6)
    assert isinstance(found.df, Undefined)
    assert isinstance(found.tau_squared.estimate, Undefined)


def test_two_studies_have_an_interval_and_no_prediction() -> None:
    found = pool([1.0, 2.0], [0.5, 0.5])

    # Equal variances: the mean, and half the squared difference is Q, below its one degree of freedom: tau² is 0.
    # t(.975; 1) = 12.7062 (any table of Student's t), se = √(.5/2), the floor holds.
    assert (found.estimate, found.tau_squared.estimate) == (1.5, 0.0)
    assert _half_width(found) == pytest.approx(12.7062047 * 0.5, rel=1e-7)
    assert isinstance(found.prediction.upper, Undefined)


@pytest.mark.parametrize("method", METHODS)
def test_effects_that_agree_exactly_differ_by_nothing(method: Method) -> None:
    found = pool([0.7, 0.7, 0.7, 0.7], [0.1, 0.2, 0.3, 0.4], method=method)

    assert found.estimate == 0.7
    assert found.q.value == 0.0
    assert found.i_squared == 0.0
    if method != "common":
        assert found.tau_squared.estimate == 0.0


def test_effects_that_agree_exactly_show_no_error_without_the_floor() -> None:
    found = pool([0.7, 0.7, 0.7], [0.1, 0.2, 0.3], floor=False)

    none = Undefined("the effects agree exactly, so without the floor they show no error")
    for undefined in (found.se, found.lower, found.upper, found.p, found.prediction.lower, found.prediction.upper):
        assert undefined == none
    assert found.estimate == 0.7
    assert isinstance(pool([0.7, 0.7, 0.7], [0.1, 0.2, 0.3]).se, float)


@pytest.mark.parametrize("method", ["paule-mandel", "dersimonian-laird", "reml"])
@pytest.mark.parametrize("power", [-45, -30, -10, 30])
@pytest.mark.parametrize("name", SETS)
def test_another_unit_gives_the_same_answer_in_that_unit(name: str, power: int, method: Method) -> None:
    # A power of two changes no digit, so this is the reference in a smaller or larger unit.
    effects, variances, _ = reference(name)
    factor = 2.0**power

    first = pool(effects, variances, method=method)
    second = pool([effect * factor for effect in effects], [each * factor**2 for each in variances], method=method)

    assert close(second.estimate, first.estimate * factor)
    for field in ("estimate", "lower", "upper"):
        assert close(getattr(second.tau_squared, field), getattr(first.tau_squared, field) * factor**2), field


@pytest.mark.parametrize("method", METHODS)
def test_a_study_that_outweighs_the_other_leaves_a_finite_answer(method: Method) -> None:
    found = pool([1.0, 2.0], [1e-20, 1.0], method=method)

    # Closed form: Q = (2 - 1)² / (1 + 1e-20) is its one degree of freedom, so nothing is left over for tau².
    assert found.estimate == pytest.approx(1.0, rel=1e-15)
    assert found.q.value == pytest.approx(1.0, rel=1e-15)
    assert found.weights == pytest.approx((1.0, 1e-20), rel=1e-12)
    if method != "common":
        assert found.tau_squared.estimate == 0.0


def test_restricted_likelihood_takes_the_deeper_of_two_valleys() -> None:
    # Found by a search over small sets; minus the log likelihood of method sheet 7.4 on 4001 points is the check.
    effects, variances = [0.4, -2.4, -2.6], [0.89, 0.001, 0.069]

    def cost(between: float) -> float:
        weights = [1 / (variance + between) for variance in variances]
        mean = sum(weight * effect for weight, effect in zip(weights, effects, strict=True)) / sum(weights)
        spread = sum(weight * (effect - mean) ** 2 for weight, effect in zip(weights, effects, strict=True))
        return 0.5 * (sum(log(1 / weight) for weight in weights) + log(sum(weights)) + spread)

    points = [step / 1000 for step in range(4001)]
    deepest = min(points, key=cost)
    assert cost(0.0) < cost(0.001)  # A valley at 0 that is not the deepest.
    assert cost(0.0) > cost(deepest)

    found = pool(effects, variances, method="reml").tau_squared.estimate

    assert found == pytest.approx(deepest, abs=1e-3)


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
        ([1.0, 2.0, 3.0], [1.0, 1.0, inf], "row 3, variance: inf given; give a finite number above 0"),
        ([inf, 2.0], [1.0, 1.0], "row 1, effect: inf given; give a finite number"),
        ([1.0, nan], [1.0, 1.0], "row 2, effect: nan given; give a finite number"),
        ([1e200, 2.0], [1.0, 1.0], r"row 1, effect: 1e\+200 given; give a number within 1e\+60 of 0, in a larger unit"),
        (
            [1.0, 2.0],
            [1.0, 1e-310],
            r"row 2, variance: 1e-310 given; give a number from 1e-60 to 1e\+60, in another unit",
        ),
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
    with pytest.raises(InputRefused, match="confidence: nan given; give a number between 0 and 1"):
        pool([1.0], [1.0], confidence=nan)
    with pytest.raises(InputRefused, match="studies: 1 given; give at least two to leave one out"):
        leave_one_out([1.0], [1.0])


STUDIES = st.lists(st.tuples(st.floats(-50, 50), st.floats(0.01, 20)), min_size=2, max_size=8)


@given(STUDIES, st.randoms(use_true_random=False), st.floats(-100, 100), st.sampled_from(METHODS))
@settings(deadline=None, max_examples=60)
def test_order_does_not_matter_and_a_shift_only_shifts(
    studies: list[tuple[float, float]], order: Any, shift: float, method: Method
) -> None:
    places = list(range(len(studies)))
    order.shuffle(places)

    def pooled(some: list[tuple[float, float]], by: float = 0.0) -> Pooled:
        return pool([effect + by for effect, _ in some], [variance for _, variance in some], method=method)

    first, second, moved = pooled(studies), pooled([studies[place] for place in places]), pooled(studies, shift)
    assert second.estimate == pytest.approx(first.estimate, rel=1e-6, abs=1e-6)
    assert second.se == pytest.approx(first.se, rel=1e-5, abs=1e-6)
    assert second.weights == pytest.approx([first.weights[place] for place in places], rel=1e-5, abs=1e-6)
    assert moved.estimate == pytest.approx(first.estimate + shift, rel=1e-6, abs=1e-5)
    assert sum(first.weights) == pytest.approx(1.0)
