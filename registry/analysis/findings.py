"""Findings: the word on a contrast, from its adjusted interval and the margin that matters."""

from __future__ import annotations

from dataclasses import dataclass
from math import comb
from typing import Literal

from registry.analysis.distributions import t_quantile
from registry.analysis.own_spread import games_howell
from registry.analysis.results import Comparison, Decomposition, InteractionContrast
from registry.analysis.undefined import Number, Undefined

Code = Literal["act", "real", "small", "unsettled"]
WORDS: dict[Code, str] = {
    "act": "worth acting on",
    "real": "real, size unsure",
    "small": "too small to matter",
    "unsettled": "not settled",
}


@dataclass(frozen=True)
class Finding:
    """What can be said of one contrast; ``sign`` is +1 or -1 when the interval lies on one side of 0, else 0."""

    code: Code | Undefined
    sign: int
    estimate: Number
    lower: Number
    upper: Number

    @property
    def words(self) -> str:
        """The finding in words, or why there is none."""
        return self.code.reason if isinstance(self.code, Undefined) else WORDS[self.code]


def judge(estimate: Number, lower: Number, upper: Number, *, margin: float | None) -> Finding:
    """Judge one contrast by its interval.

    Entirely beyond the margin: worth acting on. Entirely within it: too small to matter.
    Clear of 0 but neither: real, size unsure. Else not settled. Without a margin only the
    direction is judged, so nothing can be worth acting on or too small.
    """
    if isinstance(lower, Undefined) or isinstance(upper, Undefined):
        reason = lower if isinstance(lower, Undefined) else upper
        return Finding(reason if isinstance(reason, Undefined) else Undefined("no interval"), 0, estimate, lower, upper)
    sign = (lower > 0) - (upper < 0)
    if margin is not None and (lower > margin or upper < -margin):
        code: Code = "act"
    elif margin is not None and -margin < lower and upper < margin:
        code = "small"
    else:
        code = "real" if sign else "unsettled"
    return Finding(code, sign, estimate, lower, upper)


def judge_difference(result: Decomposition, comparison: Comparison, *, margin: float | None) -> Finding:
    """Judge the difference between two levels, adjusted for all pairs of its factor.

    With shared spread by Tukey-Kramer (Kramer 1956 Biometrics 12:307-310); with each
    combination's own by Games-Howell, the same range on Satterthwaite's error and freedom
    (Games & Howell 1976 J. Educ. Stat. 1:113-125).
    """
    if result.error == "pooled":
        family = comparison.tukey_kramer
        return judge(comparison.difference, family.lower, family.upper, margin=margin)
    levels = next(len(factor.levels) for factor in result.layout.factors if factor.name == comparison.factor)
    family = games_howell(comparison, levels=levels, confidence=result.confidence)
    return judge(comparison.difference, family.lower, family.upper, margin=margin)


def judge_interaction(result: Decomposition, contrast: InteractionContrast, *, margin: float | None) -> Finding:
    """Judge a 2 × 2 interaction contrast, adjusted by Sidak for all those of its term (Sidak 1967 JASA 62:626-633)."""
    value = contrast.value
    if isinstance(value.estimate, Undefined) or isinstance(value.se, Undefined) or isinstance(value.df, Undefined):
        return judge(value.estimate, value.lower, value.upper, margin=margin)
    sizes = {factor.name: len(factor.levels) for factor in result.layout.factors}
    family = comb(sizes[contrast.factors[0]], 2) * comb(sizes[contrast.factors[1]], 2)
    each = result.confidence ** (1 / family)
    reach = t_quantile((1 + each) / 2, value.df) * value.se
    return judge(value.estimate, value.estimate - reach, value.estimate + reach, margin=margin)
