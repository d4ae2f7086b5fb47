"""What changed between two studies, against direct computation from their trials."""

from __future__ import annotations

import ast
from fractions import Fraction
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

import registry
from registry.analysis.results import Estimate
from registry.analysis.undefined import Undefined
from registry.synthesis.changes import Change, Compared, change_between, compare
from tests.support.series import Trial, contribution, identities, mean_of, readings_of

START = ("front", "back")
LEVEL_SETS = {"a b": ("a", "b"), "a b c": ("a", "b", "c"), "b c": ("b", "c")}


def difference(trials: list[Trial], first: str, second: str) -> float:
    """Give the equal-weight difference between two levels of walk, in steps of 0.1, from the trials."""
    return sum(mean_of(trials, walk=second, start=s) - mean_of(trials, walk=first, start=s) for s in START) / 20


def found_at(changes: tuple[Change, ...], first: str, second: str) -> Change:
    return next(change for change in changes if change.corners["walk"] == (("walk", first), ("walk", second)))


def value(estimate: Estimate) -> float:
    assert isinstance(estimate.estimate, float)
    return estimate.estimate


@pytest.mark.parametrize(("one", "other"), [("a b", "a b c"), ("a b c", "b c"), ("a b c", "a b c")])
def test_contrasts_over_common_levels_agree_with_the_trials(one: str, other: str) -> None:
    sets = [LEVEL_SETS[name] for name in (one, other)]
    trials = [readings_of({"walk": walks, "start": START}, seed=seed) for seed, walks in enumerate(sets)]
    studies = [
        contribution(str(at), of_study, {"walk": walks, "start": START})
        for at, (of_study, walks) in enumerate(zip(trials, sets, strict=True))
    ]

    found = compare(studies[0], studies[1], margin=0.8)

    shared = [level for level in sets[0] if level in sets[1]]
    assert found.common["walk"] == identities("walk", shared)
    for place, first in enumerate(shared):
        for second in shared[place + 1 :]:
            change = found_at(found.differences, first, second)
            expected = [difference(of_study, first, second) for of_study in trials]
            assert value(change.first) == pytest.approx(expected[0], rel=1e-9)
            assert value(change.second) == pytest.approx(expected[1], rel=1e-9)
            assert value(change.change) == pytest.approx(expected[1] - expected[0], rel=1e-9)
            square = found_at(found.interactions, first, second)
            corners = [
                sum(
                    sign * mean_of(of_study, walk=walk, start=start) / 10
                    for sign, (walk, start) in zip((1, -1, -1, 1), product((first, second), START), strict=True)
                )
                for of_study in trials
            ]
            assert value(square.first) == pytest.approx(corners[0], rel=1e-9)
            assert value(square.second) == pytest.approx(corners[1], rel=1e-9)


def test_one_shared_level_alone_is_refused_with_its_reason() -> None:
    one, other = ("a", "b"), ("b", "c")
    first = contribution("1", readings_of({"walk": one, "start": START}, seed=1), {"walk": one, "start": START})
    trials = readings_of({"walk": other, "start": START}, seed=2)
    second = contribution("2", trials, {"walk": other, "start": START})

    found = compare(first, second, margin=None)

    assert [apart.code for apart in found.apart] == ["one_level_shared"]
    assert all("walk" not in change.corners for change in (*found.differences, *found.interactions))
    # What is left, start, is read at the one level they share.
    (start,) = found.differences
    assert value(start.second) == pytest.approx(
        (mean_of(trials, walk="b", start="back") - mean_of(trials, walk="b", start="front")) / 10, rel=1e-9
    )


def test_a_study_in_seconds_stands_beside_one_in_minutes() -> None:
    crossed = {"walk": ("a", "b"), "start": START}
    minutes = readings_of(crossed, seed=3)
    seconds = [(levels, steps * 6) for levels, steps in minutes]
    first = contribution("1", minutes, crossed)
    second = contribution("2", seconds, crossed, step=Fraction(1), scale=Fraction(1, 60))

    found = compare(first, second, margin=0.8)

    for change in (*found.differences, *found.interactions):
        assert value(change.second) == pytest.approx(value(change.first), rel=1e-12)
        assert value(change.change) == pytest.approx(0.0, abs=1e-12)
        assert change.second.se == pytest.approx(change.first.se, rel=1e-9)


def test_a_factor_held_in_one_study_narrows_the_other_to_that_slice() -> None:
    crossed = {"walk": ("a", "b"), "batch": ("4", "8", "12")}
    varied = readings_of(crossed, seed=4)
    held = readings_of({"walk": ("a", "b")}, seed=5, held={"batch": "8"})
    first = contribution("1", varied, crossed)
    second = contribution("2", held, {"walk": ("a", "b")}, held={"batch": "8"})

    found = compare(first, second, margin=None)

    assert [(apart.code, apart.factor) for apart in found.apart] == [("held_in_one", "batch")]
    (walk,) = found.differences
    assert value(walk.first) == pytest.approx(
        (mean_of(varied, walk="b", batch="8") - mean_of(varied, walk="a", batch="8")) / 10, rel=1e-9
    )
    assert [caveat.code for caveat in walk.caveats] == ["slice"]


def test_a_factor_only_one_study_has_is_averaged_with_a_warning() -> None:
    crossed = {"walk": ("a", "b"), "start": START}
    trials = readings_of(crossed, seed=6)
    first = contribution("1", trials, crossed)
    second = contribution("2", readings_of({"walk": ("a", "b")}, seed=7), {"walk": ("a", "b")})

    found = compare(first, second, margin=None)

    assert [(apart.code, apart.factor) for apart in found.apart] == [("absent_in_one", "start")]
    (walk,) = found.differences
    assert value(walk.first) == pytest.approx(difference(trials, "a", "b"), rel=1e-9)
    assert [caveat.code for caveat in walk.caveats] == ["only_one_has"]


def test_a_factor_without_a_shared_level_beside_a_contrast_is_averaged_apart() -> None:
    sets = ({"walk": ("a", "b"), "batch": ("4", "8")}, {"walk": ("a", "b"), "batch": ("12", "16")})
    first, second = (contribution(str(at), readings_of(crossed, seed=at), crossed) for at, crossed in enumerate(sets))

    found = compare(first, second, margin=None)

    assert [apart.code for apart in found.apart] == ["no_level_shared"]
    assert [caveat.code for caveat in found.differences[0].caveats] == ["averaged_apart"]


def test_blocks_never_enter_a_contrast_and_average_equally() -> None:
    crossed = {"walk": ("a", "b")}
    shifts = ("early", "late")
    trials = readings_of({**crossed, "shift": shifts}, seed=8)
    first = contribution("1", trials, crossed, blocks=shifts)
    second = contribution("2", readings_of(crossed, seed=9), crossed)

    found = compare(first, second, margin=None)

    assert [(apart.code, apart.factor) for apart in found.apart] == []
    # Additive blocks by least squares (numpy), treatment coded b = 1.
    design = np.array([[1.0, at["walk"] == "b", at["shift"] == "late"] for at, _ in trials])
    slope = np.linalg.lstsq(design, np.array([steps / 10 for _, steps in trials]), rcond=None)[0][1]
    assert value(found.differences[0].first) == pytest.approx(slope, rel=1e-9)


def test_a_change_has_the_standard_error_freedom_and_chance_of_the_method_sheet() -> None:
    # Method sheet 7.3: 3.2 (se .9, 20 df) against 1.1 (.7, 12): 2.1, se 1.140175, df 31.9995, t 1.8418, p .0748.
    one, other = Estimate(1.1, 0.7, 12.0, 0.0, 0.0), Estimate(3.2, 0.9, 20.0, 0.0, 0.0)

    found = change_between(one, other)

    assert found.estimate == pytest.approx(2.1)
    assert found.se == pytest.approx(1.140175, abs=5e-7)
    assert found.df == pytest.approx(31.9995, abs=5e-5)
    assert isinstance(found.se, float)
    t = 2.1 / found.se
    assert (t, 2 * stats.t.sf(t, found.df)) == (pytest.approx(1.8418, abs=5e-5), pytest.approx(0.0748, abs=5e-5))


def test_the_interval_of_a_change_is_adjusted_for_all_changes_of_its_term() -> None:
    crossed = {"walk": ("a", "b", "c")}
    first = contribution("1", readings_of(crossed, seed=10), crossed)
    second = contribution("2", readings_of(crossed, seed=11), crossed)

    for change in compare(first, second, margin=None).differences:
        found = change.change
        assert isinstance(found.df, float)
        assert isinstance(found.se, float)
        assert isinstance(found.upper, float)
        # Sidak for three changes of one term, the quantile from the reference library.
        quantile = stats.t.ppf((1 + 0.95 ** (1 / 3)) / 2, found.df)
        assert found.upper - value(found) == pytest.approx(quantile * found.se, rel=1e-9)


@pytest.mark.parametrize(
    ("shift", "margin", "code"),
    [(100, 0.8, "changed"), (0, 5.0, "same"), (100, None, "changed"), (0, 0.01, "unsettled")],
)
def test_a_change_is_judged_by_its_interval_and_the_margin(shift: int, margin: float | None, code: str) -> None:
    crossed = {"walk": ("a", "b")}
    trials = readings_of(crossed, seed=12, per_cell=20)
    moved = [(at, steps + (shift if at["walk"] == "b" else 0)) for at, steps in reversed(trials)]
    found = compare(contribution("1", trials, crossed), contribution("2", moved, crossed), margin=margin)

    assert found.differences[0].code == code


@pytest.mark.parametrize("standing", ["early", "extended", "exploratory"])
def test_a_change_is_not_judged_when_a_study_did_not_end_at_its_size(standing: str) -> None:
    crossed = {"walk": ("a", "b")}
    first = contribution("1", readings_of(crossed, seed=13), crossed)
    second = contribution("2", readings_of(crossed, seed=14), crossed, standing=standing)  # type: ignore[arg-type]

    change = compare(first, second, margin=0.8).differences[0]

    assert isinstance(change.code, Undefined)
    assert isinstance(change.change.lower, Undefined)
    assert isinstance(change.change.estimate, float)


def test_zero_spread_says_nothing_of_a_change() -> None:
    crossed = {"walk": ("a", "b")}
    still = [({"walk": level}, 200 + at) for at, level in enumerate("ab") for _ in range(4)]
    first, second = (contribution(key, still, crossed) for key in "12")

    change = compare(first, second, margin=0.8).differences[0]

    assert change.code == Undefined("cannot say: readings within a combination do not vary at all")
    assert isinstance(change.p, Undefined)


def test_no_path_across_studies_touches_offsets() -> None:
    # Sum-to-zero offsets depend on the level set, so subtracting those of two studies compares nothing.
    root = Path(registry.__file__).parent
    across = [
        *(root / "synthesis").glob("*.py"),
        *(
            path
            for path in (root / "services").glob("*.py")
            if "registry.synthesis" in path.read_text(encoding="utf-8")
        ),
    ]
    assert len(across) > 8
    for path in across:
        tree = ast.parse(path.read_text(encoding="utf-8"))
        names = {node.id for node in ast.walk(tree) if isinstance(node, ast.Name)}
        names |= {node.attr for node in ast.walk(tree) if isinstance(node, ast.Attribute)}
        names |= {alias.name for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) for alias in node.names}
        touched = names & {"offsets", "offset_rows", "Offset", "decompose", "term_columns"}
        assert not touched, f"{path.name} touches {touched}"


def test_studies_of_nothing_in_common_say_so() -> None:
    first = contribution("1", readings_of({"walk": ("a", "b")}, seed=15), {"walk": ("a", "b")})
    second = contribution("2", readings_of({"start": START}, seed=16), {"start": START})

    found: Compared = compare(first, second, margin=None)

    assert (found.differences, found.interactions) == ((), ())
    assert [(apart.code, apart.factor) for apart in found.apart] == [
        ("absent_in_one", "walk"),
        ("absent_in_one", "start"),
    ]
