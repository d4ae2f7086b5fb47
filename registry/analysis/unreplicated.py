"""Two-level studies without a repeated trial: screening by the contrasts themselves."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt

from registry.analysis.distributions import t_quantile
from registry.analysis.results import Decomposition
from registry.analysis.undefined import Undefined

Floats = npt.NDArray[Any]
FEWEST = 7
DRAWS = 40_000
SEED = 19890801
NOT_TWO_LEVELS = Undefined("a pseudo standard error needs factors of two levels each")
TOO_FEW = Undefined(f"a pseudo standard error needs at least {FEWEST} contrasts")
NO_NOISE = Undefined("more than half of the contrasts are 0, so they show no noise")


@dataclass(frozen=True)
class ScreenedContrast:
    """One contrast: the mean at + minus the mean at - of the product of its factors' signs."""

    factors: tuple[str, ...]
    estimate: float
    ratio_to_pse: float
    p_simulated: float


@dataclass(frozen=True)
class Screening:
    """Lenth's pseudo standard error, its margins of error, and every contrast beside it."""

    pse: float
    margin_of_error: float
    simultaneous_margin: float
    contrasts: tuple[ScreenedContrast, ...]


def screening(result: Decomposition) -> Screening | Undefined:
    """Screen the contrasts of a two-level study that shows no spread of its own.

    Only here an estimate is a difference of two means, not an offset. The margins use
    Lenth's t on a third as many degrees of freedom as contrasts; ``p_simulated`` compares
    |estimate|/PSE with what it is when nothing is real, simulated with a fixed seed. It
    rests on most contrasts being nil. Sources: Lenth 1989 Technometrics 31:469-473; Ye &
    Hamada 2000 J. Quality Technology 32:57-66.
    """
    if any(len(factor.levels) != 2 for factor in result.layout.factors):
        return NOT_TWO_LEVELS
    found: list[tuple[tuple[str, ...], float]] = []
    for term in result.terms:
        last = term.offsets[-1].value.estimate if term.offsets else None
        if isinstance(last, float):
            # Offsets of a two-level term differ in sign alone, and the mean at + stands twice as far apart.
            found.append((term.factors, 2 * last))
    if len(found) < FEWEST:
        return TOO_FEW
    pse = float(pseudo_standard_error(np.array([[estimate for _, estimate in found]]))[0])
    if pse == 0:
        return NO_NOISE
    m = len(found)
    return Screening(
        pse=pse,
        margin_of_error=t_quantile((1 + result.confidence) / 2, m / 3) * pse,
        simultaneous_margin=t_quantile((1 + result.confidence ** (1 / m)) / 2, m / 3) * pse,
        contrasts=tuple(
            ScreenedContrast(factors, estimate, estimate / pse, _chance(abs(estimate) / pse, m))
            for factors, estimate in found
        ),
    )


def pseudo_standard_error(contrasts: Floats) -> Floats:
    """Give Lenth's pseudo standard error of each row of contrasts: 1.5 times the median of the quiet ones."""
    sizes = np.abs(contrasts)
    first = 1.5 * np.median(sizes, axis=1, keepdims=True)
    quiet = np.where(sizes < 2.5 * first, sizes, np.nan)
    with np.errstate(all="ignore"):
        spread: Floats = 1.5 * np.nanmedian(np.where(first == 0, 0.0, quiet), axis=1)
    return spread


@lru_cache(maxsize=16)
def _null_ratios(contrasts: int) -> Floats:
    """Simulate |contrast|/PSE where nothing is real, sorted; the seed is fixed, so the answer is too."""
    drawn = np.random.default_rng([SEED, contrasts]).standard_normal((DRAWS, contrasts))
    ratios: Floats = np.sort((np.abs(drawn) / pseudo_standard_error(drawn)[:, None]).ravel())
    return ratios


def _chance(ratio: float, contrasts: int) -> float:
    ratios = _null_ratios(contrasts)
    beyond = len(ratios) - int(np.searchsorted(ratios, ratio, side="left"))
    return (beyond + 1) / (len(ratios) + 1)
