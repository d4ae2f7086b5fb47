"""Screening of two-level studies without a repeated trial, against worked examples."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from registry.analysis.decomposition import decompose
from registry.analysis.results import Decomposition
from registry.analysis.undefined import Undefined
from registry.analysis.unreplicated import Screening, pseudo_standard_error, screening
from tests.support.tables import reference_study, study_of

# Worked example G: filtration rate, unreplicated 2^4, standard order (Montgomery, Design and Analysis of Experiments;
# data from memory, arithmetic recomputed). A changes fastest there, so it is the last of our factors.
FILTRATION = (45, 71, 48, 65, 68, 60, 80, 65, 43, 100, 45, 104, 75, 86, 70, 96)


def two_level(names: str, values: tuple[float, ...], *, step: str = "1") -> Decomposition:
    factors = dict.fromkeys(names, ("-", "+"))
    # In standard order the first letter changes fastest.
    cells = [tuple(reversed(cell)) for cell in product((0, 1), repeat=len(names))]
    return decompose(study_of(factors, {cell: [str(v)] for cell, v in zip(cells, values, strict=True)}, step=step))


def screened(result: Decomposition) -> Screening:
    found = screening(result)
    assert isinstance(found, Screening)
    return found


def test_a_worked_example_without_repeats() -> None:
    found = screened(two_level("ABCD", FILTRATION))

    estimates = {"".join(each.factors): each.estimate for each in found.contrasts}
    assert [estimates[name] for name in ("A", "C", "D", "AC", "AD")] == pytest.approx(
        [21.625, 9.875, 14.625, -18.125, 16.625]
    )
    assert len(estimates) == 15
    assert found.pse == pytest.approx(2.625)
    assert found.margin_of_error == pytest.approx(6.748, abs=5e-4)
    assert found.simultaneous_margin == pytest.approx(13.699, abs=5e-4)


def test_what_is_real_stands_out_of_the_simulated_reference() -> None:
    found = screened(two_level("ABCD", FILTRATION))

    chances = {"".join(each.factors): each.p_simulated for each in found.contrasts}
    assert all(chances[name] < 0.01 for name in ("A", "C", "D", "AC", "AD"))
    assert all(chance > 0.1 for name, chance in chances.items() if name not in ("A", "C", "D", "AC", "AD"))
    ratios = {"".join(each.factors): each.ratio_to_pse for each in found.contrasts}
    assert ratios["AC"] == pytest.approx(-18.125 / 2.625)


def test_eddy_current_contrasts() -> None:
    # Worked example F: NIST/SEMATECH e-Handbook, unreplicated 2^3 (from memory, arithmetic recomputed).
    found = screened(two_level("XYZ", (1.70, 4.57, 0.55, 3.39, 1.51, 4.59, 0.67, 4.29), step="0.01"))

    expected = {"X": 3.1025, "Y": -0.8675, "Z": 0.2125, "XY": 0.1275, "XZ": 0.2475, "YZ": 0.2975, "XYZ": 0.1425}
    assert {"".join(each.factors): each.estimate for each in found.contrasts} == pytest.approx(expected)


def test_the_pseudo_standard_error_leaves_loud_contrasts_out() -> None:
    # Method sheet 1.7: PSE .9 (s0 = 1.2, so 12 and -5 are left out).
    contrasts = np.array([[1.0, -0.4, 12, 0.8, -5, 0.2, 0.6]])

    assert pseudo_standard_error(contrasts)[0] == pytest.approx(0.9)


@pytest.mark.parametrize(("m", "one", "all_"), [(7, 2.30, 4.89), (15, 2.16, 4.23)])
def test_the_simulated_reference_agrees_with_the_method_sheet(m: int, one: float, all_: float) -> None:
    # Method sheet 1.7, simulated there with 200,000 draws: individual and experimentwise .05 critical ratios.
    drawn = np.random.default_rng(1).standard_normal((60_000, m))
    ratios = np.abs(drawn) / pseudo_standard_error(drawn)[:, None]

    assert np.quantile(ratios, 0.95) == pytest.approx(one, abs=0.02)
    assert np.quantile(ratios.max(axis=1), 0.95) == pytest.approx(all_, abs=0.09)


@pytest.mark.parametrize(
    ("result", "reason"),
    [
        (two_level("AB", (1, 2, 3, 5)), "a pseudo standard error needs at least 7 contrasts"),
        (two_level("ABC", (1, 1, 1, 1, 2, 2, 2, 2)), "more than half of the contrasts are 0, so they show no noise"),
        (decompose(reference_study("immer_unreplicated")[0]), "a pseudo standard error needs factors of two levels"),
    ],
)
def test_what_cannot_be_screened_says_why(result: Decomposition, reason: str) -> None:
    found = screening(result)

    assert isinstance(found, Undefined)
    assert found.reason.startswith(reason)
