"""Student's t, F and the studentized range, from special functions alone."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy import special

Floats = npt.NDArray[np.float64]

# Nodes over the largest normal and over the spread; a range of many means rises more steeply and needs more.
_FEW_MEANS = 6
_NODES_OF_FEW = (80, 48)
_NODES_OF_MANY = (96, 64)
_REACH = 8.5  # Standard normal mass beyond is below 1e-16.
_TAIL = 1e-15


@lru_cache(maxsize=4096)
def t_quantile(probability: float, df: float) -> float:
    """Give the quantile of Student's t."""
    return float(special.stdtrit(df, probability))


def t_two_sided(statistic: float, df: float) -> float:
    """Give the chance that |t| is at least this large."""
    return float(2.0 * special.stdtr(df, -abs(statistic)))


def t_upper(statistic: float, df: float) -> float:
    """Give the chance that t is at least this large."""
    return float(special.stdtr(df, -statistic))


def f_upper(statistic: float, df1: float, df2: float) -> float:
    """Give the chance that F is at least this large."""
    return float(special.fdtrc(df1, df2, statistic))


def studentized_range_upper(statistic: float, means: int, df: float) -> float:
    """Give the chance that the range of some means, in standard errors, is at least this large.

    The range of ``means`` independent standard normals over an independent chi / √df
    (Tukey 1953; Hayter 1984). Gauss-Legendre over the spread, and within it over the
    largest normal; about 1e-12 off where p is above 1e-6.
    """
    if means == 2:
        # The range of two is √2 |t|, so Student's distribution says it directly.
        return t_two_sided(statistic / np.sqrt(2.0), df)
    inner, outer = _NODES_OF_FEW if means <= _FEW_MEANS else _NODES_OF_MANY
    spread, weights = spread_nodes(df, outer)
    return float(np.clip(weights @ (1.0 - _range_below(statistic * spread, means, inner)), 0.0, 1.0))


@lru_cache(maxsize=4096)
def studentized_range_quantile(probability: float, means: int, df: float) -> float:
    """Give the quantile of the studentized range, by bisection and secants on its upper tail."""
    from scipy.optimize import brentq

    upper = 1.0 - probability
    high = 8.0
    while studentized_range_upper(high, means, df) > upper:
        high *= 2.0
    return float(brentq(lambda q: studentized_range_upper(q, means, df) - upper, 0.0, high, xtol=1e-12, rtol=1e-14))


@lru_cache(maxsize=64)
def legendre(nodes: int) -> tuple[Floats, Floats]:
    """Give places in [-1, 1] and weights of Gauss-Legendre quadrature."""
    places, weights = np.polynomial.legendre.leggauss(nodes)
    return places, weights


@lru_cache(maxsize=1024)
def spread_nodes(df: float, nodes: int) -> tuple[Floats, Floats]:
    """Nodes of s = chi / √df with weights that hold its density, over all but 1e-15 of either tail."""
    low, high = (np.sqrt(2.0 * special.gammaincinv(df / 2, tail) / df) for tail in (_TAIL, 1.0 - _TAIL))
    places, weights = legendre(nodes)
    spread = low + (high - low) * (places + 1) / 2
    logs = (
        np.log(2.0)
        + (df / 2) * np.log(df / 2)
        - special.gammaln(df / 2)
        + (df - 1) * np.log(spread)
        - df * spread**2 / 2
    )
    density = np.exp(logs) * weights * (high - low) / 2
    return spread, density / density.sum()


def _range_below(widths: Floats, means: int, nodes: int) -> Floats:
    """Chance that the range of normals is below each width: k ∫ φ(z) [Φ(z) - Φ(z - w)]^(k-1) dz."""
    places, weights = legendre(nodes)
    largest = places * _REACH
    density = np.exp(-(largest**2) / 2) / np.sqrt(2 * np.pi) * weights * _REACH
    between = special.ndtr(largest)[None, :] - special.ndtr(largest[None, :] - widths[:, None])
    below: Floats = means * (between ** (means - 1)) @ density
    return below
