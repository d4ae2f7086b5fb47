"""Which combination is best: every one compared with the best of the others."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import sqrt
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import optimize, special

from registry.analysis.distributions import legendre, spread_nodes
from registry.errors import Fault, InputRefused

Floats = npt.NDArray[Any]
_NODES = (64, 40)
_REACH = 8.5


@dataclass(frozen=True)
class Contender:
    """One combination against the best of the others, higher being better.

    The true difference lies between ``lower`` (at most 0) and ``upper`` (at least 0), for
    all combinations at once. ``may_be_best`` says that it cannot be ruled out as the best;
    then -``lower`` is what choosing it gives up at worst.
    """

    mean: float
    lower: float
    upper: float
    may_be_best: bool


def compare_with_best(
    means: Sequence[float], variances: Sequence[float], *, df: Sequence[float], confidence: float = 0.95
) -> tuple[Contender, ...]:
    """Say of each mean how far it may lie from the best of the others; higher is better.

    ``variances`` are those of the means, and must be above 0; ``df`` the degrees of
    freedom behind each (one number for all where the spread is shared). Only those that
    may be best can be; one whose interval is [0, upper] is. Exact for normal readings with
    a shared spread; with each its own it is an approximation on the fewest degrees of
    freedom of any pair. Sources: Hsu 1981 Ann. Stat. 9:1026-1034; Hsu 1984 Ann. Stat.
    12:1136-1144; Edwards & Hsu 1983 JASA 78:965-971.
    """
    if len(means) < 2 or not len(means) == len(variances) == len(df):
        raise InputRefused(Fault("means", f"{len(means)} given", "give at least two, each with variance and freedom"))
    if min(variances) <= 0:
        raise InputRefused(Fault("variances", f"{min(variances)} given", "give numbers above 0"))
    m, v = np.asarray(means, dtype=float), np.asarray(variances, dtype=float)
    critical = [_critical(at, v, df, confidence) for at in range(len(m))]
    error = np.sqrt(v[:, None] + v[None, :])
    others = [np.delete(np.arange(len(m)), at) for at in range(len(m))]
    upper = [max(0.0, float(min(m[at] - m[rest] + critical[at] * error[at, rest]))) for at, rest in enumerate(others)]
    contenders = [at for at in range(len(m)) if upper[at] > 0]
    lower = [_lower(at, m, error, critical, contenders) for at in range(len(m))]
    return tuple(Contender(float(m[at]), lower[at], upper[at], may_be_best=upper[at] > 0) for at in range(len(m)))


def _lower(at: int, m: Floats, error: Floats, critical: Sequence[float], contenders: Sequence[int]) -> float:
    rivals = [rival for rival in contenders if rival != at]
    if not rivals:
        return 0.0
    return min(0.0, min(float(m[at] - m[rival] - critical[rival] * error[at, rival]) for rival in rivals))


def _critical(at: int, v: Floats, df: Sequence[float], confidence: float) -> float:
    """Give the one-sided many-to-one critical value with one mean as control."""
    rest = np.delete(v, at)
    loads = np.sqrt(v[at] / (v[at] + rest))
    return critical_value(tuple(np.round(np.sort(loads), 12).tolist()), min(df), confidence)


@lru_cache(maxsize=512)
def critical_value(loads: tuple[float, ...], df: float, confidence: float) -> float:
    """Give the value that the largest of some correlated t exceeds with chance 1 - confidence.

    ``loads`` are the square roots whose products are the correlations (product structure;
    Dunnett 1955 JASA 50:1096-1121 for equal ones). By quadrature over the common part and
    over the spread.
    """
    spread, spread_weights = spread_nodes(df, _NODES[1])
    places, weights = legendre(_NODES[0])
    common = places * _REACH
    density = np.exp(-(common**2) / 2) / sqrt(2 * np.pi) * weights * _REACH
    slopes = np.array(loads)
    own = np.sqrt(1 - slopes**2)

    def below(value: float) -> float:
        edges = (value * spread[:, None, None] + slopes * common[None, :, None]) / own
        return float(spread_weights @ (np.prod(special.ndtr(edges), axis=2) @ density))

    high = 3.0
    while below(high) < confidence:
        high *= 2
    found: float = optimize.brentq(lambda value: below(value) - confidence, 0.0, high, xtol=1e-10)
    return found
