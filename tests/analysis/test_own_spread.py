"""Terms and pairs tested with each combination's own spread, against the method sheet and the reference library."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from statsmodels.stats.oneway import anova_oneway

from registry.analysis.decomposition import decompose
from registry.analysis.own_spread import games_howell
from registry.analysis.results import Decomposition, OwnSpreadTest
from registry.analysis.undefined import Undefined
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.tallies import EMPTY, TalliedStudy, Tally
from tests.support.tables import reference_study, study_of

# Method sheet 3.2: three groups.
GROUPS = ((12, 15, 14, 11, 13), (18, 25, 16, 22, 30, 21), (14, 14, 15, 13))


def three_groups() -> Decomposition:
    readings = {(at,): [str(value) for value in group] for at, group in enumerate(GROUPS)}
    return decompose(study_of({"group": ("a", "b", "c")}, readings))


def test_one_factor_alone_gives_the_test_of_welch() -> None:
    # Method sheet 3.2, = Welch 1951: F 7.913128 on 2 and 7.478943, p .014261.
    own = three_groups().terms[0].per_cell

    assert own.f == pytest.approx(7.913128, abs=5e-7)
    assert (own.df1, own.df2) == (2, pytest.approx(7.478943, abs=5e-7))
    assert own.p == pytest.approx(0.014261, abs=5e-7)
    reference = anova_oneway([np.array(group) for group in GROUPS], use_var="unequal")
    assert own.f == pytest.approx(reference.statistic, rel=1e-10)
    assert own.p == pytest.approx(reference.pvalue, rel=1e-8)


def test_a_term_on_one_degree_of_freedom_is_the_squared_t_of_its_contrast() -> None:
    study, _ = reference_study("toothgrowth")
    result = decompose(study, error="per-cell")

    own, pair = result.terms[0].per_cell, result.comparisons[0]
    assert isinstance(pair.difference, float)
    assert isinstance(pair.se, float)
    assert own.df1 == 1
    assert own.f == pytest.approx((pair.difference / pair.se) ** 2, rel=1e-9)
    assert own.df2 == pytest.approx(pair.df, rel=1e-9)
    assert own.p == pytest.approx(pair.p_unadjusted, rel=1e-7)


def test_pairs_by_games_and_howell() -> None:
    # Method sheet 4.2: p(0, 1) = .013479 on 6.1523 degrees of freedom.
    pair = three_groups().comparisons[0]
    family = games_howell(pair, levels=3, confidence=0.95)

    assert pair.own_df == pytest.approx(6.1523, abs=5e-5)
    assert family.p == pytest.approx(0.013479, abs=5e-7)
    assert isinstance(pair.own_se, float)
    assert isinstance(pair.own_df, float)
    assert isinstance(pair.difference, float)
    reach = stats.studentized_range.ppf(0.95, 3, pair.own_df) / np.sqrt(2) * pair.own_se
    assert family.lower == pytest.approx(pair.difference - reach, rel=1e-7)


def test_equal_spreads_and_counts_come_close_to_the_pooled_test() -> None:
    readings = {(at,): [f"{10 * at + offset}" for offset in (-3, -1, 0, 1, 3) for _ in range(40)] for at in range(3)}
    result = decompose(study_of({"group": ("a", "b", "c")}, readings))

    assert result.terms[0].per_cell.f == pytest.approx(result.terms[0].equal_weight.f, rel=0.01)


def reason_of(test: OwnSpreadTest) -> str:
    assert isinstance(test.f, Undefined)
    assert test.f == test.p == test.df2
    return test.f.reason


def test_what_has_no_spread_of_its_own_says_why() -> None:
    def reason(cells: dict[tuple[int, ...], list[str]]) -> str:
        return reason_of(decompose(study_of({"a": ("1", "2"), "b": ("1", "2")}, cells)).terms[0].per_cell)

    full = {(a, b): ["1", "3", "4"] for a in range(2) for b in range(2)}
    assert reason({**full, (1, 1): ["2"]}) == "its own spread needs two trials in every combination used"
    assert reason({cell: texts for cell, texts in full.items() if cell != (1, 1)}) == (
        "it averages over a combination without trials"
    )
    still = {cell: [texts[0]] * 3 for cell, texts in full.items()}
    assert reason(still) == "cannot say: readings within a combination do not vary at all"


def test_with_blocks_a_term_has_no_test_of_its_own_spread() -> None:
    study, _ = reference_study("npk")

    for term in decompose(study).terms:
        assert reason_of(term.per_cell) == "with blocks the spread is shared by all combinations"


@pytest.mark.filterwarnings("ignore::UserWarning")
def test_the_chance_of_a_false_alarm_is_kept_where_the_pooled_one_is_not() -> None:
    # Method sheet 3.2, simulated there: 2 x 3 cells with n 4, 8, 6, 10, 5, 7 and sd 5, 2, 1, 1, 4, 3, interaction on
    # 2 degrees of freedom at .05: Johansen .055, pooled .173. 4,000 runs have a standard error of .0035 and .006.
    rng = np.random.default_rng(20261201)
    counts, spreads = (4, 8, 6, 10, 5, 7), (5, 2, 1, 1, 4, 3)
    layout = Layout((Factor("a", ("1", "2")), Factor("b", ("1", "2", "3"))))
    alarms = np.zeros(2)
    runs = 1000
    for _ in range(runs):
        tallies: dict[tuple[int, ...], Tally] = {}
        for cell, n, sd in zip(layout.cells, counts, spreads, strict=True):
            tally = EMPTY
            for reading in np.rint(1000 * rng.normal(0, sd, n)):
                tally = tally.add(int(reading))
            tallies[cell] = tally
        term = decompose(TalliedStudy(layout, study_of({"a": ("1",)}, {(0,): ["1"]}).step, 0, tallies)).terms[2]
        alarms += [float(term.per_cell.p) < 0.05, float(term.equal_weight.p) < 0.05]  # type: ignore[arg-type]
    # 1,000 runs: standard error .007 and .012; four of them either way.
    assert abs(alarms[0] / runs - 0.055) < 0.029
    assert abs(alarms[1] / runs - 0.173) < 0.048
