"""One effect pooled over independent studies, with the spread between them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
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
THREE_STUDIES = "three studies: the prediction rests on one degree of freedom and is very wide"
_CLOSE = 1e-15


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
    lengths, no study, a variance that is not above 0, or a choice that does not exist.
    """
    y, v = _checked(effects, variances)
    _check_choices(method, interval, confidence)
    k = len(y)
    tau = _tau_squared(y, v, method)
    weights = 1 / (v + tau)
    mean = _mean(y, weights)
    scale = _scale(y, weights, mean, floor=floor) if interval == "hartung-knapp" else 1.0
    se = sqrt(scale / weights.sum()) if k > 1 or interval == "normal" else sqrt(v[0])
    df, reach = _reach(k, interval, confidence)
    q = _q(y, v, 0.0)
    return Pooled(
        studies=k,
        method=method,
        interval=interval,
        estimate=mean,
        se=se,
        df=df,
        lower=reach if isinstance(reach, Undefined) else mean - reach * se,
        upper=reach if isinstance(reach, Undefined) else mean + reach * se,
        p=_p(mean / se, df),
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
    if not effects:
        raise InputRefused(Fault("studies", "none given", "give at least one"))
    for row, (effect, variance) in enumerate(zip(effects, variances, strict=True), start=1):
        if not isfinite(effect):
            raise InputRefused(Fault(f"row {row}, effect", f"{effect} given", "give a finite number"))
        if not (isfinite(variance) and variance > 0):
            raise InputRefused(Fault(f"row {row}, variance", f"{variance} given", "give a finite number above 0"))
    return np.array(effects, dtype=float), np.array(variances, dtype=float)


def _check_choices(method: str, interval: str, confidence: float) -> None:
    for name, given, accepted in (("method", method, get_args(Method)), ("interval", interval, get_args(IntervalKind))):
        if given not in accepted:
            raise InputRefused(Fault(name, f"{given!r} given", f"choose {', '.join(accepted)}"))
    if not 0 < confidence < 1:
        raise InputRefused(Fault("confidence", f"{confidence} given", "give a number between 0 and 1, as 0.95"))


def _mean(y: Floats, weights: Floats) -> float:
    return float(weights @ y / weights.sum())


def _scale(y: Floats, weights: Floats, mean: float, *, floor: bool) -> float:
    """How the effects scatter about their mean, against what their weights promise; 1 for a single study."""
    if len(y) == 1:
        return 1.0
    scale = float(weights @ (y - mean) ** 2 / (len(y) - 1))
    return max(1.0, scale) if floor else scale


def _reach(k: int, interval: IntervalKind, confidence: float) -> tuple[Number, Number]:
    """Degrees of freedom, and how many standard errors the interval reaches either way."""
    if interval == "normal":
        return NORMAL, float(special.ndtri((1 + confidence) / 2))
    if k == 1:
        return ONE_STUDY, ONE_STUDY
    return float(k - 1), t_quantile((1 + confidence) / 2, k - 1)


def _p(statistic: float, df: Number) -> Number:
    if isinstance(df, Undefined):
        return float(2 * special.ndtr(-abs(statistic))) if df is NORMAL else df
    return t_two_sided(statistic, df)


def _q(y: Floats, v: Floats, tau: float) -> float:
    """Cochran's Q with a between-study variance; it falls as that rises."""
    weights = 1 / (v + tau)
    return float(weights @ (y - _mean(y, weights)) ** 2)


def _tau_squared(y: Floats, v: Floats, method: Method) -> float:
    if len(y) == 1 or method == "common":
        return 0.0
    if method == "dersimonian-laird":
        w = 1 / v
        return max(0.0, (_q(y, v, 0.0) - (len(y) - 1)) / float(w.sum() - (w**2).sum() / w.sum()))
    if method == "paule-mandel":
        return _where_falls_to(lambda tau: _q(y, v, tau), float(len(y) - 1))
    return _restricted_likelihood(y, v)


def _where_falls_to(falling: Callable[[float], float], level: float) -> float:
    """Find where a falling function of a variance comes down to a level; 0 where it starts below."""
    if falling(0.0) <= level:
        return 0.0
    high = 1.0
    while falling(high) > level:
        high *= 4.0
    root: float = optimize.brentq(lambda tau: falling(tau) - level, 0.0, high, xtol=_CLOSE * high, rtol=8.9e-16)
    return root


def _restricted_likelihood(y: Floats, v: Floats) -> float:
    """Maximise the restricted likelihood over a grid, for it may have several peaks, then polish on its slope."""

    def cost(tau: float) -> float:
        w = 1 / (v + tau)
        spread = float(w @ (y - _mean(y, w)) ** 2)
        return 0.5 * (float(np.log(v + tau).sum()) + float(np.log(w.sum())) + spread)

    def slope(tau: float) -> float:
        w = 1 / (v + tau)
        return 0.5 * float(w.sum() - (w**2).sum() / w.sum() - w**2 @ (y - _mean(y, w)) ** 2)

    top = float(np.ptp(y)) ** 2 + float(v.max())
    grid = np.concatenate([[0.0], np.geomspace(1e-8 * top, 4 * top, 400)])
    best = int(np.argmin([cost(tau) for tau in grid]))
    low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]
    if best == 0 and slope(0.0) >= 0:
        return 0.0
    if slope(low) * slope(high) < 0:
        root: float = optimize.brentq(slope, low, high, xtol=_CLOSE * high, rtol=8.9e-16)
        return root
    found: float = optimize.minimize_scalar(cost, bounds=(low, high), method="bounded", options={"xatol": 1e-12}).x
    return found


def _tau_interval(y: Floats, v: Floats, tau: float, method: Method, confidence: float) -> TauSquared:
    """Give the variance with its Q-profile interval (Viechtbauer 2007 Stat. Med. 26:37-52)."""
    k = len(y)
    if method == "common":
        return TauSquared(COMMON, COMMON, COMMON)
    if k == 1:
        return TauSquared(ONE_STUDY, ONE_STUDY, ONE_STUDY)
    beyond = (1 - confidence) / 2

    def profile(between: float) -> float:
        return _q(y, v, between)

    lower = _where_falls_to(profile, float(special.chdtri(k - 1, beyond)))
    upper = _where_falls_to(profile, float(special.chdtri(k - 1, 1 - beyond)))
    return TauSquared(tau, lower, upper)


def _prediction(k: int, mean: float, se: float, tau: float, method: Method, confidence: float) -> Prediction:
    if method == "common":
        return Prediction(COMMON, COMMON, COMMON)
    if k < 3:
        return Prediction(TOO_FEW, TOO_FEW, TOO_FEW)
    reach = t_quantile((1 + confidence) / 2, k - 2) * sqrt(tau + se**2)
    return Prediction(float(k - 2), mean - reach, mean + reach)
