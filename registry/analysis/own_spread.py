"""Tests and families that let each combination have its own spread."""

from __future__ import annotations

from math import sqrt
from typing import Any

import numpy as np
import numpy.typing as npt

from registry.analysis.distributions import f_upper, studentized_range_quantile, studentized_range_upper
from registry.analysis.exact import ExactStudy
from registry.analysis.results import Comparison, FamilyInterval, OwnSpreadTest
from registry.analysis.undefined import BLOCKS_SHARE, EMPTY_CELL, LONE_TRIAL, NO_SPREAD, Undefined

Floats = npt.NDArray[Any]


def welch_james(study: ExactStudy, rows: Floats) -> OwnSpreadTest:
    """Test that all contrasts of a term are 0 when combinations differ in spread.

    ``rows`` (q x cells) are independent contrasts of cell means. T = m'P m with
    P = C'(C V C')^-1 C and V the variances of the cell means; F = T / (q + 2A - 6A/(q + 2))
    on q and q(q + 2)/(3A) degrees of freedom, A = sum of (V_c P_cc)^2/(n_c - 1). With one
    factor of several levels this is Welch's test. Sources: Johansen 1980 Biometrika
    67:85-92; James 1951 Biometrika 38:324-329; Welch 1951 Biometrika 38:330-336.
    """
    q = len(rows)
    reason = _why_not(study, rows)
    if reason is not None:
        return OwnSpreadTest(reason, q, reason, reason)
    used = np.any(rows != 0, axis=0)
    c = rows[:, used]
    v = study.variances[used] / study.n[used]
    between = (c * v) @ c.T
    if (v == 0).any() and np.linalg.matrix_rank(between) < q:
        return OwnSpreadTest(NO_SPREAD, q, NO_SPREAD, NO_SPREAD)
    means = np.zeros(len(study.cells))
    means[study.filled] = study.group_means
    solved = np.linalg.solve(between, c)
    values = c @ means[used]
    t = float(values @ np.linalg.solve(between, values))
    diagonal = np.einsum("ij,ij->j", c, solved)
    a = float(((v * diagonal) ** 2 / (study.n[used] - 1)).sum())
    f = t / (q + 2 * a - 6 * a / (q + 2))
    df2 = q * (q + 2) / (3 * a)
    return OwnSpreadTest(f, q, df2, f_upper(f, q, df2))


def _why_not(study: ExactStudy, rows: Floats) -> Undefined | None:
    if study.layout.block is not None:
        return BLOCKS_SHARE
    used = np.any(rows != 0, axis=0)
    if (study.n[used] == 0).any():
        return EMPTY_CELL
    return LONE_TRIAL if (study.n[used] < 2).any() else None


def games_howell(pair: Comparison, *, levels: int, confidence: float) -> FamilyInterval:
    """Adjust a difference for all pairs of its factor's levels, with each combination's own spread.

    The studentized range on Satterthwaite's standard error and freedom. Source: Games &
    Howell 1976 J. Educ. Stat. 1:113-125.
    """
    value, se, df = pair.difference, pair.own_se, pair.own_df
    if isinstance(value, Undefined) or isinstance(se, Undefined) or isinstance(df, Undefined):
        reason = next(part for part in (value, se, df) if isinstance(part, Undefined))
        return FamilyInterval(reason, reason, reason)
    p = studentized_range_upper(abs(value) / se * sqrt(2), levels, df)
    reach = studentized_range_quantile(confidence, levels, df) / sqrt(2) * se
    return FamilyInterval(p, value - reach, value + reach)
