"""A decomposition agrees with published and independently computed answers, and keeps its identities."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from registry.analysis.decomposition import decompose
from registry.analysis.results import Decomposition, TermResult
from registry.analysis.undefined import Undefined
from registry.errors import InputRefused
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.tallies import TalliedStudy, Tally
from tests.support.tables import reference_study, study_of

# Sources of every set: tests/reference/README.md. Answers by R 4.2.2 with car, emmeans and sandwich.
FACTORIAL = (
    "auto_noise", "cholesterol_3way", "cholesterol_3way_unbalanced", "diet_exercise_unbalanced", "immer_unreplicated",
    "moore", "npk", "poisons", "quine_empty_cells", "toothgrowth", "warpbreaks", "yield_blend_crop",
)  # fmt: skip
DIVISIONS = ("sequential", "hierarchical", "equal_weight")


def near(value: object, expected: float, *, of: float, rel: float = 1e-9) -> bool:
    """Whether a number agrees to 1e-9 relative, or to 1e-15 of the size of what it was computed from."""
    return isinstance(value, float) and abs(value - expected) <= max(rel * abs(expected), 1e-14 * of)


def term(result: Decomposition, factors: list[str]) -> TermResult:
    return next(term for term in result.terms if set(term.factors) == set(factors))


@pytest.mark.parametrize("name", FACTORIAL)
def test_cells_and_totals_agree_with_the_reference(name: str) -> None:
    study, expected = reference_study(name)
    result = decompose(study)

    cells = {frozenset(cell.levels.items()): cell for cell in result.cells}
    size = max(abs(cell["mean"]) for cell in expected["cells"])
    for cell in expected["cells"]:
        found = cells[frozenset(cell["levels"].items())]
        assert found.n == cell["n"]
        assert near(found.mean, cell["mean"], of=size)
        assert cell["sd"] is None or near(found.sd, cell["sd"], of=size)
    assert result.trials == expected["trials"]
    assert near(result.total.ss, expected["total"]["ss"], of=expected["total"]["ss"])
    assert near(result.residual.ss, expected["residual"]["ss"], of=expected["total"]["ss"])
    assert result.residual.df == expected["residual"]["df"]
    assert near(result.r_squared, expected["r_squared"], of=1.0)
    assert near(result.as_logged.estimate, expected["mean_as_logged"], of=size)


@pytest.mark.parametrize("division", DIVISIONS)
@pytest.mark.parametrize("name", FACTORIAL)
def test_every_division_of_the_sum_of_squares_agrees_with_the_reference(name: str, division: str) -> None:
    study, expected = reference_study(name)
    result = decompose(study)

    for line in expected[division]:
        if division == "equal_weight" and line["factors"] == ["block"]:
            continue  # The block's equal-weight entry is null by the contract.
        found = getattr(term(result, line["factors"]), division)
        assert found.df == line["df"], line
        assert near(found.ss, line["ss"], of=expected["total"]["ss"]), line
        if "f" in line and expected["residual"]["df"]:
            assert near(found.f, line["f"], of=1.0), line
            assert abs(found.p - line["p"]) < 1e-8, line


@pytest.mark.parametrize("name", [name for name in FACTORIAL if name not in ("npk", "quine_empty_cells")])
def test_sums_of_squares_agree_with_rational_arithmetic(name: str) -> None:
    study, expected = reference_study(name)
    result = decompose(study)

    for division in DIVISIONS:
        for line in expected["exact"][division]:
            found = getattr(term(result, line["factors"]), division)
            assert found.ss == pytest.approx(float(line["ss"]), rel=1e-12, abs=1e-13 * expected["total"]["ss"])


@pytest.mark.parametrize("name", FACTORIAL)
def test_offsets_and_means_agree_with_the_reference(name: str) -> None:
    study, expected = reference_study(name)
    result = decompose(study)
    size = max(abs(cell["mean"]) for cell in expected["cells"])

    for entry in expected.get("offsets", []):
        offsets = {frozenset(offset.levels.items()): offset.value for offset in term(result, entry["factors"]).offsets}
        for value in entry["values"]:
            check_estimate(offsets[frozenset(value["levels"].items())], value, size)
    means = {frozenset(mean.levels.items()): mean.equal_weight for mean in result.marginal_means}
    for value in expected["marginal_means"]:
        found = means[frozenset(value["levels"].items())]
        if "note" in value:
            assert isinstance(found.estimate, Undefined)
        else:
            check_estimate(found, value, size)
    if "grand_mean" in expected:
        check_estimate(result.equal_weight, expected["grand_mean"], size)


def check_estimate(found: Any, value: Mapping[str, Any], size: float) -> None:
    assert near(found.estimate, value["estimate"], of=size), value
    for part in ("se", "lower", "upper"):
        if value.get(part) is not None:
            assert near(getattr(found, part), value[part], of=size), (part, value)


@pytest.mark.parametrize("name", FACTORIAL)
def test_pairs_and_slices_agree_with_the_reference(name: str) -> None:
    study, expected = reference_study(name)
    result = decompose(study)

    for pair in expected["pairs"]:
        found = next(
            line
            for line in result.comparisons
            if line.factor == pair["factor"] and {line.from_level, line.to_level} == set(pair["pair"])
        )
        assert abs(found.tukey_kramer.p - pair["p"]) < 1e-8  # type: ignore[operator]
        assert near(found.se, pair["se"], of=1.0)
        ends = sorted(abs(end) for end in (found.tukey_kramer.lower, found.tukey_kramer.upper))  # type: ignore[arg-type]
        assert ends == pytest.approx(sorted((abs(pair["lower"]), abs(pair["upper"]))), rel=1e-8)
    for entry in expected["slices"]:
        found_slice = next(s for s in result.simple_effects if s.factor == entry["factor"] and s.at == entry["at"])
        assert found_slice.df == entry["df"]
        assert near(found_slice.f, entry["f"], of=1.0)
        assert abs(found_slice.p - entry["p"]) < 1e-8  # type: ignore[operator]


@pytest.mark.parametrize("name", FACTORIAL)
def test_errors_of_each_cells_own_spread_are_those_of_the_cell_means_model(name: str) -> None:
    # HC2 of the saturated model is v / n of each cell (methods of MacKinnon & White 1985), by R's sandwich.
    study, expected = reference_study(name)
    result = decompose(study, error="per-cell")

    for entry in expected["own_spread_differences"]:
        later, _, earlier = entry["contrast"].strip("()").partition(" - ")
        found = next(
            line
            for line in result.comparisons
            if line.factor == entry["factor"] and {line.from_level, line.to_level} == {later, earlier}
        )
        assert near(found.se, entry["se"], of=1.0), entry


def test_quine_reports_partial_freedom_and_names_the_empty_combinations() -> None:
    study, _ = reference_study("quine_empty_cells")

    result = decompose(study)

    assert result.balance == "empty cells"
    partial = term(result, ["Age", "Lrn"])
    assert (partial.df, partial.full_df) == (2, 3)
    assert isinstance(partial.equal_weight.ss, Undefined)
    assert isinstance(result.equal_weight.estimate, Undefined)
    assert any(
        note.startswith(
            "Age × Lrn: 2 of 3 degrees of freedom can be estimated: no trials at Eth=A, Sex=M, Age=F3, Lrn=SL"
        )
        for note in result.notes
    )


def test_npk_drops_the_term_aliased_with_blocks_and_gives_the_block_343_295_both_times() -> None:
    # Yates; Venables & Ripley 2002: block 343.295 on 5, N 189.2817, residual 185.2867 on 12 (worked example H).
    study, _ = reference_study("npk")

    result = decompose(study)

    block, gone = result.terms[0], term(result, ["N", "P", "K"])
    assert (block.role, block.factors) == ("block", ("block",))
    assert block.sequential.ss == pytest.approx(343.295, abs=5e-4)
    assert block.hierarchical.ss == pytest.approx(343.295, abs=5e-4)
    assert isinstance(block.equal_weight.ss, Undefined)
    assert (gone.df, gone.offsets) == (0, ())
    assert "N × P × K: aliased with blocks" in result.notes
    assert term(result, ["N"]).equal_weight.f == pytest.approx(12.259, abs=5e-4)
    assert term(result, ["K"]).equal_weight.f == pytest.approx(6.166, abs=5e-4)


def test_immer_has_sums_of_squares_but_nothing_to_judge_them_by() -> None:
    study, _ = reference_study("immer_unreplicated")

    result = decompose(study)

    assert result.residual.df == 0
    assert isinstance(result.residual.ms, Undefined)
    for line in result.terms:
        assert isinstance(line.equal_weight.ss, float)
        assert isinstance(line.equal_weight.f, Undefined)
        assert isinstance(line.offsets[0].value.estimate, float)
        assert isinstance(line.offsets[0].value.se, Undefined)
    assert isinstance(result.comparisons[0].tukey_kramer.p, Undefined)


def test_a_replicated_two_by_two_agrees_with_the_handbook() -> None:
    # Montgomery, Design and Analysis of Experiments, replicated 2² (data from memory): worked example D.
    study = study_of(
        {"A": ("-", "+"), "B": ("-", "+")},
        {
            (0, 0): ("28", "25", "27"),
            (1, 0): ("36", "32", "32"),
            (0, 1): ("18", "19", "23"),
            (1, 1): ("31", "30", "29"),
        },
    )

    result = decompose(study)

    lines = [line.equal_weight for line in result.terms]
    assert [line.ss for line in lines] == pytest.approx([208.33, 75, 8.33], abs=5e-3)
    assert [line.f for line in lines] == pytest.approx([53.19, 19.15, 2.13], abs=5e-3)
    assert result.residual.ss == pytest.approx(31.33, abs=5e-3)
    assert result.total.ss == 323
    assert result.comparisons[0].difference == pytest.approx(8.333, abs=5e-4)
    assert result.comparisons[1].difference == -5.0


def test_the_pilot_plant_agrees_with_the_handbook() -> None:
    # Box, Hunter & Hunter, replicated 2³ pilot plant (data from memory): worked example E.
    runs = ["59 61", "74 70", "50 58", "69 67", "50 54", "81 85", "46 44", "79 81"]
    cells = [(t, c, k) for k in (0, 1) for c in (0, 1) for t in (0, 1)]
    levels = ("-", "+")
    study = study_of(
        {"T": levels, "C": levels, "K": levels}, dict(zip(cells, (run.split() for run in runs), strict=True))
    )

    result = decompose(study)

    # An effect of a two-level factor is twice its offset at the upper level; of a product, its sign says how many.
    effects = {line.factors: 2 * line.offsets[-1].value.estimate for line in result.terms}  # type: ignore[operator]
    assert effects == {
        ("T",): 23, ("C",): -5, ("K",): 1.5, ("T", "C"): 1.5, ("T", "K"): 10, ("C", "K"): 0, ("T", "C", "K"): 0.5,
    }  # fmt: skip
    assert result.residual.ms == 8
    assert result.comparisons[0].se == pytest.approx(1.414, abs=5e-4)


def t1() -> TalliedStudy:
    """Make the unbalanced 3 × 2 × 2 design whose answers were computed apart and agree with statsmodels to 1e-9."""
    n = (3, 5, 2, 4, 6, 2, 3, 3, 4, 5, 2, 6)
    s = (120, 207, 71, 155, 257, 87, 123, 121, 194, 256, 103, 318)
    q = (4802, 8603, 2521, 6017, 11053, 3797, 5057, 4909, 9426, 13130, 5317, 16886)
    layout = Layout((Factor("A", ("0", "1", "2")), Factor("B", ("0", "1")), Factor("G", ("0", "1"))))
    tallies = {cell: Tally(*sums) for cell, *sums in zip(layout.cells, n, s, q, strict=True)}
    return TalliedStudy(layout, Fraction(1), 0, tallies)


def test_the_unbalanced_design_of_the_method_sheet_comes_out() -> None:
    result = decompose(t1())

    assert result.residual.ms == pytest.approx(6.992424, abs=5e-7)
    assert (result.residual.df, result.residual.ss) == (33, 230.75)
    assert result.equal_weight.estimate == pytest.approx(43.959722, abs=5e-7)
    assert result.as_logged.estimate == pytest.approx(44.7111, abs=5e-5)
    offsets = [offset.value for offset in result.terms[0].offsets]
    assert [offset.estimate for offset in offsets] == pytest.approx([-5.047222, -2.043056, 7.090278], abs=5e-7)
    assert offsets[0].se == pytest.approx(0.606824, abs=5e-7)
    assert (offsets[0].lower, offsets[0].upper) == pytest.approx((-6.2818, -3.8126), abs=5e-5)
    expected = {
        "sequential": (1206.6856, 5.6012, 26.2393, 74.5927, 10.0858, 0.1653, 5.1245),
        "hierarchical": (1166.5616, 9.0756, 23.2911, 64.9951, 9.7971, 0.1653, 5.1245),
        "equal_weight": (1082.8481, 14.4703, 20.9792, 68.8134, 10.1560, 0.1251, 5.1245),
    }
    for division, sums in expected.items():
        assert [getattr(line, division).ss for line in result.terms] == pytest.approx(sums, abs=5e-5)


def test_equal_weights_and_as_logged_differ_where_trials_fall_unevenly() -> None:
    # Two by two, means 3, 1, 2, 4 with n 5, 3, 5, 7 (method sheet 1.2; statsmodels agrees).
    readings = {(0, 0): ["3"] * 5, (1, 0): ["1"] * 3, (0, 1): ["2"] * 5, (1, 1): ["4"] * 7}
    study = study_of({"A": ("1", "2"), "B": ("1", "2")}, readings)

    result = decompose(study)

    assert [line.equal_weight.ss for line in result.terms] == pytest.approx([0, 4.565217, 18.260870], abs=5e-7)
    assert result.terms[0].hierarchical.ss == pytest.approx(0.905797, abs=5e-7)
    second = next(mean for mean in result.marginal_means if mean.levels == {"A": "2"})
    assert (second.equal_weight.estimate, second.as_logged.estimate) == (2.5, 3.1)
    assert isinstance(result.terms[2].equal_weight.f, Undefined)  # No reading varies within its cell.


cell_tallies = st.lists(st.lists(st.integers(-500, 500), min_size=1, max_size=5), min_size=12, max_size=12)


def tallied(readings: list[list[int]], *, scale: int = 1, shift: int = 0) -> TalliedStudy:
    texts = [[str(scale * value + shift) for value in values] for values in readings]
    levels = {"walk": ("a", "b", "c"), "start": ("d", "e"), "batch": ("f", "g")}
    cells = Layout(tuple(Factor(name, level) for name, level in levels.items())).cells
    return study_of(levels, dict(zip(cells, texts, strict=True)))


def divisions(result: Decomposition) -> list[float]:
    return [getattr(line, name).ss for line in result.terms for name in DIVISIONS] + [result.residual.ss]


@settings(max_examples=30, deadline=None)
@given(readings=cell_tallies, shift=st.integers(-(10**12), 10**12))
def test_shifting_all_readings_moves_only_the_means(readings: list[list[int]], shift: int) -> None:
    before, after = decompose(tallied(readings)), decompose(tallied(readings, shift=shift))

    assert divisions(after) == pytest.approx(divisions(before), rel=1e-9, abs=1e-6)
    assert after.terms[0].offsets[0].value.estimate == before.terms[0].offsets[0].value.estimate


@settings(max_examples=30, deadline=None)
@given(readings=cell_tallies, scale=st.integers(2, 1000))
def test_scaling_readings_scales_sums_of_squares_by_the_square(readings: list[list[int]], scale: int) -> None:
    before, after = decompose(tallied(readings)), decompose(tallied(readings, scale=scale))

    assert divisions(after) == pytest.approx([scale**2 * ss for ss in divisions(before)], rel=1e-9, abs=1e-6 * scale**2)


@settings(max_examples=30, deadline=None)
@given(readings=st.lists(st.lists(st.integers(-500, 500), min_size=3, max_size=3), min_size=12, max_size=12))
def test_sums_of_squares_of_a_balanced_study_add_up_to_the_total(readings: list[list[int]]) -> None:
    result = decompose(tallied(readings))

    whole = sum(line.sequential.ss for line in result.terms) + result.residual.ss  # type: ignore[misc]
    assert whole == pytest.approx(result.total.ss, rel=1e-12)


@settings(max_examples=30, deadline=None)
@given(readings=cell_tallies)
def test_offsets_of_every_term_sum_to_zero_over_each_of_its_factors(readings: list[list[int]]) -> None:
    result = decompose(tallied(readings))

    for line in result.terms:
        for factor in line.factors:
            sums: dict[frozenset[tuple[str, str]], float] = {}
            for offset in line.offsets:
                rest = frozenset((name, level) for name, level in offset.levels.items() if name != factor)
                sums[rest] = sums.get(rest, 0.0) + offset.value.estimate  # type: ignore[operator]
            assert all(abs(total) < 1e-9 for total in sums.values())


def test_a_study_without_readings_is_refused() -> None:
    study = TalliedStudy(Layout((Factor("walk", ("a", "b")),)), t1().step, 0, {})

    with pytest.raises(InputRefused, match="no reading counts; log or restore at least one"):
        decompose(study)


def test_an_empty_combination_leaves_what_does_not_touch_it() -> None:
    readings = {(0, 0): ["3", "4"], (0, 1): ["1", "2"], (1, 0): ["5", "7"]}
    study = study_of({"walk": ("serpentine", "return"), "batch": ("4", "12")}, readings)

    result = decompose(study)

    means = {frozenset(mean.levels.items()): mean.equal_weight.estimate for mean in result.marginal_means}
    assert means[frozenset({("walk", "serpentine")})] == 2.5
    assert isinstance(means[frozenset({("walk", "return")})], Undefined)
    assert "cannot estimate walk × batch: no trials at walk=return, batch=12" in result.notes
    assert isinstance(result.comparisons[0].difference, Undefined)
    assert result.simple_effects[0].df == 1  # Walk at batch 4 can be said.
    assert isinstance(result.simple_effects[1].f, Undefined)
