"""Anytime-valid judgement of one contrast: right at whatever moment somebody looks."""

from __future__ import annotations

from dataclasses import dataclass
from math import exp, inf, log, sqrt

from registry.analysis.undefined import Undefined

# When it may speak (our rule, from simulations with skewed and unequal spreads).
LEAST_FREEDOM = 20
LEAST_IN_ORDER = 3
LEAST_AS_IT_COMES = 20
TOO_SOON = Undefined("closed before its size, and too few trials for an interval that holds at any moment")


@dataclass(frozen=True)
class AnytimeJudgement:
    """The p-value that holds at any moment, and the half-width of the interval that does."""

    p: float
    half_width: float


def anytime(
    estimate: float, *, unscaled_variance: float, mean_square: float, df: float, tuning: float, alpha: float
) -> AnytimeJudgement | Undefined:
    """Judge one contrast so that looking often promises no more than was kept.

    ``unscaled_variance`` is the sum of k²/n over the cells used, ``mean_square`` the
    residual mean square on ``df`` degrees of freedom, ``tuning`` the effect variance fixed
    beforehand in units of the spread's variance. Right at every moment together, whatever
    the order of trials, as long as it did not depend on their results. Undefined where
    the interval would be infinite. Source: Lindon, Ham, Tingley & Bojinov,
    arXiv 2210.08589, with the share r = v / (v + tuning) in place of the balanced g / (g + n).
    """
    r = unscaled_variance / (unscaled_variance + tuning)
    squared = estimate**2 / (mean_square * unscaled_variance)
    log_e = 0.5 * log(r) + 0.5 * (df + 1) * (log(1 + squared / df) - log(1 + r * squared / df))
    p = min(1.0, exp(-log_e)) if log_e < inf else 0.0
    x = (r * alpha**2) ** (1 / (df + 1))
    if x <= r:
        return TOO_SOON
    return AnytimeJudgement(p, sqrt(mean_square * unscaled_variance) * sqrt(df * (1 - x) / (x - r)))


def may_speak(df: float, counts: tuple[int, ...], *, in_order: bool) -> bool:
    """Whether an anytime interval may be shown: enough freedom, and enough trials in every cell used.

    ``in_order`` says that cells were run in a balanced order; where they were run as it
    came, every cell used needs more trials.
    """
    least = min(counts, default=0)
    return least >= LEAST_AS_IT_COMES or (in_order and df >= LEAST_FREEDOM and least >= LEAST_IN_ORDER)
