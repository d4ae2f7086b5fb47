"""Shares of variation: how much of it a term takes up, with the doubt in that."""

from __future__ import annotations

from dataclasses import dataclass

from scipy import optimize, special

from registry.analysis.results import Decomposition, TermResult
from registry.analysis.undefined import NO_SPREAD, Number, Undefined

BELOW_NOISE = "below noise"


@dataclass(frozen=True)
class Shares:
    """A term's shares of variation from its equal-weight sum of squares.

    ``partial`` is SS/(SS + residual) with its interval; ``omega`` and ``partial_omega``
    take off what chance alone would give and are never below 0: then ``below_noise``.
    """

    partial: Number
    lower: Number
    upper: Number
    omega: Number
    partial_omega: Number
    below_noise: bool


def shares_of(result: Decomposition, term: TermResult) -> Shares:
    """Say which share of variation a term takes up.

    The interval is that of the noncentrality of F, turned into lambda/(lambda + N).
    Sources: Steiger 2004 Psychological Methods 9:164-182; Olejnik & Algina 2003
    Psychological Methods 8:434-447.
    """
    line, residual = term.equal_weight, result.residual
    if isinstance(line.ss, Undefined) or isinstance(residual.ms, Undefined) or isinstance(line.f, Undefined):
        reason = next(part for part in (line.ss, residual.ms, line.f) if isinstance(part, Undefined))
        return Shares(reason, reason, reason, reason, reason, below_noise=False)
    if residual.ms <= 0:
        return Shares(NO_SPREAD, NO_SPREAD, NO_SPREAD, NO_SPREAD, NO_SPREAD, below_noise=False)
    n, beyond_chance = result.trials, line.ss - line.df * residual.ms
    beyond = (1 - result.confidence) / 2
    lower, upper = (_noncentrality(line.f, line.df, residual.df, chance) for chance in (1 - beyond, beyond))
    return Shares(
        partial=line.ss / (line.ss + residual.ss),
        lower=_as_share(lower, n),
        upper=_as_share(upper, n),
        omega=max(0.0, beyond_chance / (result.total.ss + residual.ms)),
        partial_omega=max(0.0, beyond_chance / (line.ss + (n - line.df) * residual.ms)),
        below_noise=beyond_chance < 0,
    )


def _as_share(noncentrality: Number, n: int) -> Number:
    return noncentrality if isinstance(noncentrality, Undefined) else noncentrality / (noncentrality + n)


def _noncentrality(f: float, df1: int, df2: int, chance: float) -> Number:
    """Find the noncentrality under which F falls below the one observed with a given chance; 0 where none does."""

    def gap(noncentrality: float) -> float:
        return float(special.ncfdtr(df1, df2, noncentrality, f)) - chance

    if gap(0.0) <= 0:
        return 0.0
    high = max(1.0, 2 * f * df1)
    while (there := gap(high)) > 0:
        high *= 2
    if there != there:  # NaN: the distribution function has left its range.
        return Undefined("F is too large for its noncentrality to be computed")
    found: float = optimize.brentq(gap, 0.0, high, xtol=1e-12 * high, rtol=8.9e-16)
    return found
