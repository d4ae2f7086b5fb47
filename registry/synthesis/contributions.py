"""What one study brings to a question across studies: its tallies, by lasting identities of factors and levels."""

from __future__ import annotations

from collections.abc import Hashable, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property, reduce
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from registry.analysis.distributions import t_upper
from registry.analysis.estimation import Estimator
from registry.analysis.looks import TOO_SOON, AnytimeJudgement, anytime, may_speak
from registry.analysis.results import ErrorPolicy, Estimate
from registry.analysis.undefined import NO_SPREAD, Undefined
from registry.trials.tallies import TalliedStudy

Whole = npt.NDArray[Any]
Identity = Hashable
PartRole = Literal["treatment", "block", "held"]
Standing = Literal["full", "early", "extended", "exploratory"]
EXPLORATORY = Undefined("no plan was locked before its first trial, so it shows a direction only")
NO_PLANNING_VARIANCE = Undefined(
    "closed before its size with each combination's own spread, and its plan states no spread to judge by"
)


@dataclass(frozen=True)
class FactorPart:
    """How one study uses a factor of the series; levels by identity, in the order of its layout."""

    factor: Identity
    role: PartRole
    levels: tuple[Identity, ...]


@dataclass(frozen=True)
class Contribution:
    """One study as others are set beside it.

    ``parts`` name its treatment factors in the order of the layout, then block and held
    ones. ``scale`` turns its response's unit into the unit of the question. ``tuning`` is
    that of its plan, a multiple of a contrast's planned variance at ``per_cell`` trials;
    ``in_order`` says that every trial followed its balanced run order.
    """

    key: Identity
    title: str
    tallied: TalliedStudy
    parts: tuple[FactorPart, ...]
    error: ErrorPolicy
    scale: Fraction = Fraction(1)
    standing: Standing = "full"
    per_cell: int | None = None
    tuning: float | None = None
    alpha: float = 0.05
    in_order: bool = False

    @cached_property
    def crossed(self) -> tuple[FactorPart, ...]:
        """The treatment factors, in the order of the layout."""
        return tuple(part for part in self.parts if part.role == "treatment")

    def part(self, factor: Identity) -> FactorPart | None:
        """Say how this study uses a factor, if it does."""
        return next((part for part in self.parts if part.factor == factor), None)

    @cached_property
    def estimator(self) -> Estimator:
        """The study made ready to be asked."""
        return Estimator.of(self.tallied, error=self.error)


@dataclass(frozen=True)
class Evidence:
    """One contrast as one study sees it, in the unit of the question.

    ``p_up`` and ``p_down`` are one-sided, against no difference; ``p_small`` is that of
    lying within the margin. All three are 1 where the study may not judge; ``counts``
    says whether it is judged at all, and so whether it enters a pool.
    """

    estimate: Estimate
    p_up: float
    p_down: float
    p_small: float
    counts: bool


def coefficients(
    study: Contribution, corners: Mapping[Identity, tuple[Identity, Identity]], over: Mapping[Identity, tuple[Any, ...]]
) -> tuple[Whole, int]:
    """Coefficients over a study's cells of (second - first) level of every factor in ``corners``.

    Every other treatment factor is averaged equally over its levels in ``over``, or over
    all it has where ``over`` is silent. Whole numbers, with their common denominator.
    """
    vectors: list[Whole] = []
    denominator = 1
    for part in study.crossed:
        vector = np.zeros(len(part.levels), dtype=np.int64)
        if part.factor in corners:
            first, second = corners[part.factor]
            vector[part.levels.index(second)], vector[part.levels.index(first)] = 1, -1
        else:
            averaged = over.get(part.factor, part.levels)
            vector[[part.levels.index(level) for level in averaged]] = 1
            denominator *= len(averaged)
        vectors.append(vector)
    return reduce(np.kron, vectors)[None, :], denominator


def evidence(study: Contribution, row: Whole, denominator: int, *, margin: float | None) -> Evidence:
    """Estimate one contrast, with the interval and the p-values that its study may give.

    A study that reached its size gives the ordinary ones. One closed early or extended
    gives those that hold at any moment, where it may speak. One without a locked plan
    shows a direction only. Source of ``p_small``: Schuirmann 1987 J. Pharmacokin.
    Biopharm. 15:657-680, two one-sided tests.
    """
    (found,) = study.estimator.estimates(row, denominator, of_mean=False)
    here = _scaled(found, float(study.scale))
    value, se, df = here.estimate, here.se, here.df
    if isinstance(value, Undefined) or isinstance(se, Undefined) or isinstance(df, Undefined):
        return Evidence(here, 1.0, 1.0, 1.0, counts=False)
    if study.standing == "exploratory":
        return _silent(here, EXPLORATORY)
    if study.standing == "full":
        small = max(t_upper((value + margin) / se, df), t_upper((margin - value) / se, df)) if margin else 1.0
        return Evidence(here, t_upper(value / se, df), t_upper(-value / se, df), small, counts=True)
    found_anytime = _at_any_moment(study, found, row, denominator)
    if isinstance(found_anytime, Undefined):
        return _silent(here, found_anytime)
    reach = found_anytime.half_width * float(study.scale)
    shown = replace(here, lower=value - reach, upper=value + reach)
    within = margin is not None and abs(value) + reach < margin
    return Evidence(
        shown,
        p_up=found_anytime.p if value > 0 else 1.0,
        p_down=found_anytime.p if value < 0 else 1.0,
        # The interval stands for the two one-sided tests, each at half of what it leaves out.
        p_small=study.alpha / 2 if within else 1.0,
        counts=True,
    )


def _silent(here: Estimate, reason: Undefined) -> Evidence:
    return Evidence(replace(here, lower=reason, upper=reason), 1.0, 1.0, 1.0, counts=False)


def _scaled(found: Estimate, scale: float) -> Estimate:
    """Tell a difference in another unit; its freedom stays."""
    value, se, lower, upper = (
        number if isinstance(number, Undefined) else number * scale
        for number in (found.estimate, found.se, found.lower, found.upper)
    )
    return Estimate(value, se, found.df, lower, upper)


def _at_any_moment(study: Contribution, found: Estimate, row: Whole, denominator: int) -> AnytimeJudgement | Undefined:
    """Judge a contrast of a study that did not end at its size; the estimate is in the study's own unit."""
    if study.error == "per-cell":
        return NO_PLANNING_VARIANCE
    if study.tuning is None or study.per_cell is None:
        return EXPLORATORY
    value, df = found.estimate, found.df
    scale = study.estimator.spread.scale()
    if isinstance(value, Undefined) or isinstance(df, Undefined) or isinstance(scale, Undefined):
        return NO_SPREAD
    used = tuple(int(n) for n, k in zip(study.estimator.exact.n, row[0], strict=True) if k)
    if not may_speak(df, used, in_order=study.in_order):
        return TOO_SOON
    k = row.astype(float) / denominator
    blocks = next((len(part.levels) for part in study.parts if part.role == "block"), 1)
    planned = float((k**2).sum()) / (study.per_cell * blocks)
    return anytime(
        value,
        unscaled_variance=float(study.estimator.division.fit.pooled_variance(k)[0]),
        mean_square=scale,
        df=df,
        tuning=study.tuning * planned,
        alpha=study.alpha,
    )
