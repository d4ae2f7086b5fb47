"""Estimates of linear functions of a study's cell means, with errors by its one spread policy."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import sqrt
from typing import Any

import numpy as np
import numpy.typing as npt

from registry.analysis.distributions import t_quantile
from registry.analysis.divisions import Division, divide
from registry.analysis.exact import ExactStudy
from registry.analysis.fits import Spread
from registry.analysis.results import ErrorPolicy, Estimate
from registry.analysis.undefined import NO_FREEDOM, Number, Undefined
from registry.trials.tallies import TalliedStudy

Whole = npt.NDArray[Any]


@dataclass(frozen=True)
class Estimator:
    """A study made ready to be asked: exact sums, their division, the spread policy and the confidence.

    "pooled" judges everything by the residual mean square of the study's full model,
    "per-cell" by Satterthwaite from the variance of each cell used.
    """

    exact: ExactStudy
    division: Division
    error: ErrorPolicy
    confidence: float

    @classmethod
    def of(cls, study: TalliedStudy, *, error: ErrorPolicy, confidence: float = 0.95) -> Estimator:
        """Make a tallied study ready; refuses one without any reading."""
        exact = ExactStudy.of(study)
        return cls(exact, divide(exact), error, confidence)

    @cached_property
    def spread(self) -> Spread:
        """The residual mean square that errors are judged by."""
        df = self.division.residual_df
        return Spread(float(self.division.residual_ss / df) if df > 0 else NO_FREEDOM, df)

    def estimates(self, rows: Whole, denominator: int, *, of_mean: bool) -> list[Estimate]:
        """Estimate sum(rows[i] * cell mean) / denominator for each row i, in response units."""
        values = self.division.fit.values(rows, denominator, of_mean=of_mean)
        errors = self.errors(rows.astype(float) / denominator, values)
        return [self.estimate(value, *error) for value, error in zip(values, errors, strict=True)]

    def errors(self, rows: npt.NDArray[np.float64], values: list[Number]) -> list[tuple[Number, Number]]:
        """Give standard error and df of each row, by the policy; undefined wherever the value is."""
        if self.error == "per-cell":
            own = self.division.fit.own_variance(rows)
            return [
                (value, value) if isinstance(value, Undefined) else (root(variance), df)
                for value, (variance, df) in zip(values, own, strict=True)
            ]
        scale = self.spread.scale()
        if isinstance(scale, Undefined):
            return [(scale, scale)] * len(values)
        sizes = np.sqrt(scale * self.division.fit.pooled_variance(rows)).tolist()
        df = float(self.spread.df)
        return [
            (value, value) if isinstance(value, Undefined) else (size, df)
            for value, size in zip(values, sizes, strict=True)
        ]

    def estimate(self, value: Number, se: Number, df: Number) -> Estimate:
        """Put a value and its error together as an estimate with its interval."""
        if isinstance(value, Undefined) or isinstance(se, Undefined) or isinstance(df, Undefined):
            reason = next(part for part in (value, se, df) if isinstance(part, Undefined))
            return Estimate(value, se, df, reason, reason)
        reach = t_quantile((1 + self.confidence) / 2, df) * se
        return Estimate(value, se, df, value - reach, value + reach)


def root(variance: Number) -> Number:
    """Turn a variance into a standard error."""
    return variance if isinstance(variance, Undefined) else sqrt(variance)
