"""The studentized range and the quantiles agree with a general-purpose library and with printed tables."""

from __future__ import annotations

import pytest
from scipy import stats

from registry.analysis.distributions import (
    f_upper,
    studentized_range_quantile,
    studentized_range_upper,
    t_quantile,
    t_two_sided,
)


@pytest.mark.parametrize("means", [2, 3, 4, 7])
@pytest.mark.parametrize("df", [1, 3, 12, 198])
@pytest.mark.parametrize("statistic", [0.4, 2.5, 3.7, 6.0])
def test_the_studentized_range_agrees_with_scipy(means: int, df: int, statistic: float) -> None:
    # scipy.stats.studentized_range, SciPy 1.17: a general-purpose reference library.
    expected = stats.studentized_range.sf(statistic, means, df)

    assert studentized_range_upper(statistic, means, df) == pytest.approx(expected, abs=1e-8)


def test_the_studentized_range_agrees_with_the_table() -> None:
    # q(.95; 3, 12) = 3.77 in every printed table of the studentized range; 3.772929 by scipy.stats.tukey_hsd.
    assert studentized_range_quantile(0.95, 3, 12) == pytest.approx(3.772929, abs=5e-7)


def test_t_and_f_agree_with_the_tables() -> None:
    # NIST/SEMATECH e-Handbook of Statistical Methods, tables of t and F: t(.975; 20) = 2.086; F(.95; 2, 10) = 4.103.
    assert t_quantile(0.975, 20) == pytest.approx(2.086, abs=5e-4)
    assert t_two_sided(2.086, 20) == pytest.approx(0.05, abs=5e-5)
    assert f_upper(4.103, 2, 10) == pytest.approx(0.05, abs=5e-5)
