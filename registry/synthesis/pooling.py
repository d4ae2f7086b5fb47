"""One effect pooled over independent studies, with the spread between them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite, sqrt
from typing import Literal, get_args

import numpy as np
import numpy.typing as npt
from scipy import optimize, special

from registry.analysis.distributions import t_quantile, t_two_sided
from registry.analysis.undefined import Number, Undefined
from registry.errors import Fault, InputRefused

Floats = npt.NDArray[np.float64]
Method = Literal["paule-mandel", "dersimonian-laird", "reml", "common"]
IntervalKind = Literal["hartung-knapp", "normal"]
ONE_STUDY = Undefined("one study cannot show how studies differ")
COMMON = Undefined("one common effect is assumed, so studies do not differ")
NORMAL = Undefined("a normal interval has no degrees of freedom")
TOO_FEW = Undefined("a prediction needs three studies")
NO_SCATTER = Undefined("the effects agree exactly, so without the floor they show no error")
THREE_STUDIES = "three studies: the prediction rests on one degree of freedom and is very wide"
_CLOSE = 1e-15
_LARGEST = 1e60  # Squares of squares of such numbers are still within a float.


@dataclass(frozen=True)
class TauSquared:
    """The variance of the true effects between studies, in squared units, with its interval by the Q profile."""

    estimate: Number
    lower: Number
    upper: Number


@dataclass(frozen=True)
class Heterogeneity:
    """Cochran's Q on its degrees of freedom, and the chance of one at least as large if all effects were equal."""

    value: Number
    df: int
    p: Number


@dataclass(frozen=True)
class Prediction:
    """Where the true effect of one more study like these may lie."""

    df: Number
    lower: Number
    upper: Number


@dataclass(frozen=True)
class Pooled:
    """The pooled effect; ``weights`` are each study's share, in the order given, and sum to 1."""

    studies: int
    method: Method
    interval: IntervalKind
    estimate: float
    se: Number
    df: Number
    lower: Number
    upper: Number
    p: Number
    tau_squared: TauSquared
    i_squared: Number
    q: Heterogeneity
    prediction: Prediction
    weights: tuple[float, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True)
class LeftOut:
    """The pooled effect without one study, by its place in the order given."""

    without: int
    estimate: float
    lower: Number
    upper: Number


def pool(
    effects: Sequence[float],
    variances: Sequence[float],
    *,
    method: Method = "paule-mandel",
    interval: IntervalKind = "hartung-knapp",
    floor: bool = True,
    confidence: float = 0.95,
) -> Pooled:
    """Say what independent studies together say of one effect.

    ``effects`` and ``variances`` (length k, effect units and their squares) are each
    study's estimate and squared standard error, taken as known. "common" answers for
    these studies only; the others allow true effects to differ, with a variance by
    Paule & Mandel 1982 J. Res. NBS 87:377-385, DerSimonian & Laird 1986 Contr. Clin.
    Trials 7:177-188, or restricted likelihood (Viechtbauer 2005 J. Educ. Behav. Stat.
    30:261-293). "hartung-knapp" widens by how the effects scatter (Hartung & Knapp 2001
    Stat. Med. 20:3875-3889), and with ``floor`` never narrows (Röver, Knapp & Friede 2015
    BMC Med. Res. Meth. 15:99). The prediction has k - 2 degrees of freedom (Higgins,
    Thompson & Spiegelhalter 2009 JRSS A 172:137-159). Raises InputRefused for unequal
    lengths, no study, a variance that is not above 0, a number beyond 1e60 (or a variance
    below 1e-60), or a choice that does not exist.
    """
    y, v = _checked(effects, variances)
    _check_choices(method, interval, confidence)
    k = len(y)
    tau = _tau_squared(y, v, method)
    weights = 1 / (v + tau)
    mean = _mean(y, weights)
    scale = _scale(y, weights, floor=floor) if interval == "hartung-knapp" else 1.0
    se = sqrt(scale / weights.sum()) if scale > 0 else NO_SCATTER
    df, reach = _reach(k, interval, confidence)
    lower, upper = _limits(mean, se, reach)
    q = _q(y, v, 0.0)
    return Pooled(
        studies=k,
        method=method,
        interval=interval,
        estimate=mean,
        se=se,
        df=df,
        lower=lower,
        upper=upper,
        p=_p(mean, se, df),
        tau_squared=_tau_interval(y, v, tau, method, confidence),
        i_squared=ONE_STUDY if k == 1 else max(0.0, (q - (k - 1)) / q) if q > 0 else 0.0,
        q=Heterogeneity(q, k - 1, float(special.chdtrc(k - 1, q))) if k > 1 else Heterogeneity(ONE_STUDY, 0, ONE_STUDY),
        prediction=_prediction(k, mean, se, tau, method, confidence),
        weights=tuple(float(weight) for weight in weights / weights.sum()),
        notes=(THREE_STUDIES,) if k == 3 and method != "common" else (),
    )


def leave_one_out(
    effects: Sequence[float],
    variances: Sequence[float],
    *,
    method: Method = "paule-mandel",
    interval: IntervalKind = "hartung-knapp",
    floor: bool = True,
    confidence: float = 0.95,
) -> tuple[LeftOut, ...]:
    """Pool again without each study in turn, to see which one a reading hangs on; needs two studies or more."""
    if len(effects) < 2:
        raise InputRefused(Fault("studies", f"{len(effects)} given", "give at least two to leave one out"))
    left = []
    for at in range(len(effects)):
        rest = pool(
            [*effects[:at], *effects[at + 1 :]],
            [*variances[:at], *variances[at + 1 :]],
            method=method,
            interval=interval,
            floor=floor,
            confidence=confidence,
        )
        left.append(LeftOut(at, rest.estimate, rest.lower, rest.upper))
    return tuple(left)


def _checked(effects: Sequence[float], variances: Sequence[float]) -> tuple[Floats, Floats]:
    if len(effects) != len(variances):
        raise InputRefused(
            Fault("studies", f"{len(effects)} effects and {len(variances)} variances given", "give one of each a study")
        )
    if len(effects) == 0:
        raise InputRefused(Fault("studies", "none given", "give at least one"))
    for row, (effect, variance) in enumerate(zip(effects, variances, strict=True), start=1):
        if not isfinite(effect):
            raise InputRefused(Fault(f"row {row}, effect", f"{effect} given", "give a finite number"))
        if not (isfinite(variance) and variance > 0):
            raise InputRefused(Fault(f"row {row}, variance", f"{variance} given", "give a finite number above 0"))
        if abs(effect) > _LARGEST:
            accepted = f"give a number within {_LARGEST:g} of 0, in a larger unit"
            raise InputRefused(Fault(f"row {row}, effect", f"{effect} given", accepted))
        if not 1 / _LARGEST <= variance <= _LARGEST:
            accepted = f"give a number from {1 / _LARGEST:g} to {_LARGEST:g}, in another unit"
            raise InputRefused(Fault(f"row {row}, variance", f"{variance} given", accepted))
    return np.array(effects, dtype=float), np.array(variances, dtype=float)


def _check_choices(method: str, interval: str, confidence: float) -> None:
    for name, given, accepted in (("method", method, get_args(Method)), ("interval", interval, get_args(IntervalKind))):
        if given not in accepted:
            raise InputRefused(Fault(name, f"{given!r} given", f"choose {', '.join(accepted)}"))
    if not 0 < confidence < 1:
        raise InputRefused(Fault("confidence", f"{confidence} given", "give a number between 0 and 1, as 0.95"))


def _deviations(y: Floats, weights: Floats) -> tuple[float, Floats]:
    """Give the weighted mean and each effect's distance from it.

    Both are measured from the heaviest study: effects that agree exactly are then exactly
    0 apart, and a study that outweighs all others keeps the digits of its own distance.
    """
    start = y[weights.argmax()]
    apart = y - start
    mean = weights @ apart / weights.sum()
    return float(start + mean), apart - mean


def _mean(y: Floats, weights: Floats) -> float:
    return _deviations(y, weights)[0]


def _scatter(y: Floats, weights: Floats) -> float:
    return float(weights @ _deviations(y, weights)[1] ** 2)


def _freedom(weights: Floats) -> float:
    """Give Σw - Σw²/Σw as Σ w (rest of w) / Σw, so that one heavy study cannot cancel it to 0."""
    heaviest, total = weights.argmax(), weights.sum()
    rest = total - weights
    rest[heaviest] = np.delete(weights, heaviest).sum()
    return float(weights @ rest / total)


def _scale(y: Floats, weights: Floats, *, floor: bool) -> float:
    """How the effects scatter about their mean, against what their weights promise; 1 for a single study."""
    if len(y) == 1:
        return 1.0
    scale = _scatter(y, weights) / (len(y) - 1)
    return max(1.0, scale) if floor else scale


def _reach(k: int, interval: IntervalKind, confidence: float) -> tuple[Number, Number]:
    """Degrees of freedom, and how many standard errors the interval reaches either way."""
    if interval == "normal":
        return NORMAL, float(special.ndtri((1 + confidence) / 2))
    if k == 1:
        return ONE_STUDY, ONE_STUDY
    return float(k - 1), t_quantile((1 + confidence) / 2, k - 1)


def _limits(mean: float, se: Number, reach: Number) -> tuple[Number, Number]:
    if isinstance(reach, Undefined):
        return reach, reach
    if isinstance(se, Undefined):
        return se, se
    return mean - reach * se, mean + reach * se


def _p(mean: float, se: Number, df: Number) -> Number:
    if isinstance(se, Undefined):
        return se
    if isinstance(df, Undefined):
        return float(2 * special.ndtr(-abs(mean / se))) if df is NORMAL else df
    return t_two_sided(mean / se, df)


def _q(y: Floats, v: Floats, tau: float) -> float:
    """Cochran's Q with a between-study variance; it falls as that rises."""
    return _scatter(y, 1 / (v + tau))


def _tau_squared(y: Floats, v: Floats, method: Method) -> float:
    if len(y) == 1 or method == "common":
        return 0.0
    if method == "dersimonian-laird":
        return max(0.0, (_q(y, v, 0.0) - (len(y) - 1)) / _freedom(1 / v))
    if method == "paule-mandel":
        return _where_q_falls_to(y, v, float(len(y) - 1))
    return _restricted_likelihood(y, v)


def _where_q_falls_to(y: Floats, v: Floats, level: float) -> float:
    """Find the between-study variance at which Q comes down to a level; 0 where it starts below.

    The search steps up from the smallest variance, so that its closeness does not hang on the unit.
    """

    def above(tau: float) -> float:
        return _q(y, v, tau) - level

    if above(0.0) <= 0:
        return 0.0
    low, high = 0.0, float(v.min())
    while above(high) > 0:
        low, high = high, 4 * high
    return float(optimize.brentq(above, low, high, xtol=_CLOSE * float(v.min()), rtol=8.9e-16))


def _restricted_likelihood(y: Floats, v: Floats) -> float:
    """Find every valley of the restricted likelihood's cost on a grid, polish each on its slope, take the deepest."""

    def cost(tau: float) -> float:
        w = 1 / (v + tau)
        return 0.5 * (float(np.log(v + tau).sum()) + float(np.log(w.sum())) + _scatter(y, w))

    def slope(tau: float) -> float:
        w = 1 / (v + tau)
        return 0.5 * (_freedom(w) - float(w**2 @ _deviations(y, w)[1] ** 2))

    smallest = float(v.min())
    top = float(np.ptp(y)) ** 2 + float(v.max())
    grid = [0.0, *np.geomspace(1e-4 * smallest, 4 * top, 400).tolist()]
    slopes = [slope(tau) for tau in grid]
    valleys = [0.0] if slopes[0] >= 0 else []
    for low, high, before, after in zip(grid, grid[1:], slopes, slopes[1:], strict=False):
        if before < 0 <= after:
            valleys.append(float(optimize.brentq(slope, low, high, xtol=_CLOSE * smallest, rtol=8.9e-16)))
    return min(valleys, key=cost)


def _tau_interval(y: Floats, v: Floats, tau: float, method: Method, confidence: float) -> TauSquared:
    """Give the variance with its Q-profile interval (Viechtbauer 2007 Stat. Med. 26:37-52)."""
    k = len(y)
    if method == "common":
        return TauSquared(COMMON, COMMON, COMMON)
    if k == 1:
        return TauSquared(ONE_STUDY, ONE_STUDY, ONE_STUDY)
    beyond = (1 - confidence) / 2
    lower = _where_q_falls_to(y, v, float(special.chdtri(k - 1, beyond)))
    upper = _where_q_falls_to(y, v, float(special.chdtri(k - 1, 1 - beyond)))
    return TauSquared(tau, lower, upper)


def _prediction(k: int, mean: float, se: Number, tau: float, method: Method, confidence: float) -> Prediction:
    if method == "common":
        return Prediction(COMMON, COMMON, COMMON)
    if k < 3:
        return Prediction(TOO_FEW, TOO_FEW, TOO_FEW)
    if isinstance(se, Undefined):
        return Prediction(float(k - 2), se, se)
    reach = t_quantile((1 + confidence) / 2, k - 2) * sqrt(tau + se**2)
    return Prediction(float(k - 2), mean - reach, mean + reach)
