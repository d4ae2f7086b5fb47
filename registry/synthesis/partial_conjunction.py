"""How many studies show it: partial conjunction of independent p-values, and false discovery over a family."""

from __future__ import annotations

from collections.abc import Sequence
from math import log

from scipy import special

_LEAST = 1e-300  # Below it a logarithm says no more.


def at_least(p: Sequence[float], studies: int) -> float:
    """Give the evidence that at least some number of studies have an effect, by Fisher's combination.

    The p-value of the hypothesis that fewer than ``studies`` of them have it: the largest
    n - u + 1 combined. p must come from independent studies. Sources: Benjamini & Heller
    2008 Biometrics 64:1215-1222; Fisher 1932, Statistical Methods for Research Workers.
    """
    rest = sorted(p)[studies - 1 :]
    statistic = -2.0 * sum(log(max(each, _LEAST)) for each in rest)
    return float(special.chdtrc(2 * len(rest), statistic))


def count_shown(p: Sequence[float], *, alpha: float) -> int:
    """Give a lower bound on how many studies have an effect, right with chance 1 - alpha.

    The largest u for which every count up to u is shown; the claims are nested, so no
    further correction is needed. Source: Benjamini & Heller 2008, as above.
    """
    shown = 0
    while shown < len(p) and at_least(p, shown + 1) <= alpha:
        shown += 1
    return shown


def discovery_adjusted(p: Sequence[float]) -> tuple[float, ...]:
    """Adjust p-values for the false discovery rate over their family.

    Entry i is the smallest rate at which claim i would be made. Source: Benjamini &
    Hochberg 1995 JRSS B 57:289-300.
    """
    order = sorted(range(len(p)), key=lambda at: p[at], reverse=True)
    adjusted = [1.0] * len(p)
    least = 1.0
    for rank, at in zip(range(len(p), 0, -1), order, strict=True):
        least = min(least, p[at] * len(p) / rank)
        adjusted[at] = least
    return tuple(adjusted)
