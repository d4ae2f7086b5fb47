"""Shares of variation, against published values and the reference library."""

from __future__ import annotations

import pytest
from scipy import stats

from registry.analysis.decomposition import decompose
from registry.analysis.shares import Shares, shares_of
from registry.analysis.undefined import Undefined
from tests.support.tables import reference_study, study_of

# ToothGrowth, supplement by dose, N = 60 (method sheet 4.6): omega squared and partial omega squared as published by
# other libraries; partial eta squared with the bounds lambda/(lambda + N), computed there.
TOOTH = (
    (0.0554519, 0.1954082, 0.2238, 0.0531, 0.3770),
    (0.6925787, 0.7520660, 0.7731, 0.6377, 0.8234),
    (0.0236466, 0.0938470, 0.1320, 0.0013, 0.2735),
)


def test_shares_of_a_published_study() -> None:
    study, _ = reference_study("toothgrowth")
    result = decompose(study)

    for term, (omega, partial_omega, partial, lower, upper) in zip(result.terms, TOOTH, strict=True):
        found = shares_of(result, term)
        assert found.omega == pytest.approx(omega, abs=1e-7)
        assert found.partial_omega == pytest.approx(partial_omega, abs=1e-7)
        assert found.partial == pytest.approx(partial, abs=5e-5)
        assert found.lower == pytest.approx(lower, abs=5e-5)
        assert found.upper == pytest.approx(upper, abs=5e-5)


def test_the_bounds_are_those_of_the_noncentral_f_of_the_reference_library() -> None:
    study, _ = reference_study("moore")
    result = decompose(study)
    n = result.trials

    for term in result.terms:
        found, line = shares_of(result, term), term.equal_weight
        for bound, chance in ((found.lower, 0.975), (found.upper, 0.025)):
            assert isinstance(bound, float)
            if bound > 0:
                noncentrality = bound * n / (1 - bound)
                assert stats.ncf.cdf(line.f, line.df, result.residual.df, noncentrality) == pytest.approx(chance)


def test_less_than_chance_would_give_is_told_as_zero_below_noise() -> None:
    readings = {(0,): ["10", "20", "30"], (1,): ["11", "20", "30"]}
    result = decompose(study_of({"walk": ("a", "b")}, readings))

    found = shares_of(result, result.terms[0])

    assert (found.omega, found.partial_omega, found.below_noise) == (0.0, 0.0, True)
    assert found.lower == 0.0


@pytest.mark.parametrize(
    ("readings", "reason"),
    [
        ({(0,): ["1"], (1,): ["2"]}, "no error estimate yet: no combination has been run twice"),
        ({(0,): ["1", "1"], (1,): ["2", "2"]}, "cannot say: readings within a combination do not vary at all"),
    ],
)
def test_without_a_residual_there_is_no_share(readings: dict[tuple[int, ...], list[str]], reason: str) -> None:
    result = decompose(study_of({"walk": ("a", "b")}, readings))

    found = shares_of(result, result.terms[0])

    assert found == Shares(*[Undefined(reason)] * 5, below_noise=False)


def test_a_huge_f_still_has_bounds_within_one() -> None:
    readings = {(at,): [str(1000 * at + turn) for turn in range(4)] for at in range(3)}
    result = decompose(study_of({"walk": ("a", "b", "c")}, readings))

    found = shares_of(result, result.terms[0])

    assert isinstance(found.lower, float)
    assert isinstance(found.upper, float)
    assert 0.99 < found.lower < found.upper < 1
