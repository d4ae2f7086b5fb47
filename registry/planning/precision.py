"""How many trials a combination an interval of some width takes."""

from __future__ import annotations

from math import sqrt

from scipy import special

from registry.analysis.distributions import t_quantile
from registry.errors import Fault, InputRefused

MOST_TRIALS = 1_000_000


def upper_bound_of_spread(sd: float, df: float, *, chance: float = 0.8) -> float:
    """Give the standard deviation that the true one stays below with some chance.

    A spread taken from an earlier study is itself an estimate; planning by this bound
    makes up for it. s · √(df / χ²(1 - chance; df)).
    """
    return sd * sqrt(df / float(special.chdtri(df, chance)))


def trials_for_precision(
    half_width: float, *, sd: float, squares: float, combinations: int, confidence: float = 0.95
) -> int:
    """Say how many trials of every combination bring a contrast's interval to a half-width or below.

    ``squares`` is the sum of the contrast's squared coefficients over the combinations;
    errors have combinations · (trials - 1) degrees of freedom, as when a study is balanced
    and its spread shared. ``sd`` and ``half_width`` are in the same unit. Raises
    InputRefused where a number is not above 0 or no study could be so large.
    """
    for name, given in (("half-width", half_width), ("standard deviation", sd), ("squares", squares)):
        if not given > 0:
            raise InputRefused(Fault(name, f"{given} given", "give a number above 0"))

    def reached(trials: int) -> bool:
        quantile = t_quantile((1 + confidence) / 2, combinations * (trials - 1))
        return quantile * sd * sqrt(squares / trials) <= half_width

    if not reached(MOST_TRIALS):
        raise InputRefused(Fault("half-width", f"{half_width} given", f"{MOST_TRIALS} trials would not reach it"))
    low, high = 1, 2
    while not reached(high):
        low, high = high, 2 * high
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if reached(middle) else (middle, high)
    return high
