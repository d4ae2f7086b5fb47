"""How linear functions of cell means are estimated: cell by cell, or within a block model."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from registry.analysis.coefficients import orthonormal
from registry.analysis.exact import ExactStudy
from registry.analysis.undefined import (
    ALIASED,
    BLOCKS_SHARE,
    CONFOUNDED,
    EMPTY_CELL,
    LONE_TRIAL,
    NO_SPREAD,
    Number,
    Undefined,
)

Floats = npt.NDArray[np.float64]
Whole = npt.NDArray[Any]
_NEARLY_ZERO = 1e-9


@dataclass(frozen=True)
class Spread:
    """The residual mean square and its degrees of freedom; ms is undefined without freedom."""

    ms: Number
    df: int

    def scale(self) -> float | Undefined:
        """Give the mean square when errors can be judged by it; zero spread can judge nothing."""
        if isinstance(self.ms, Undefined):
            return self.ms
        return self.ms if self.ms > 0 else NO_SPREAD


class Fit(Protocol):
    """Estimates of linear functions of the cell means, with their errors."""

    def values(self, rows: Whole, denominator: int, *, of_mean: bool) -> list[Number]:
        """Estimate sum(rows[i] * mean) / denominator for each row i, in response units."""

    def pooled_variance(self, rows: Floats) -> Floats:
        """Variance of each row's estimate in units of the residual mean square; NaN where it has none."""

    def own_variance(self, rows: Floats) -> list[tuple[Number, Number]]:
        """Variance of each row's estimate when each cell has its own spread, and Satterthwaite's df."""

    def covariance(self, rows: Floats) -> Floats:
        """Covariance of the rows' estimates in units of the residual mean square."""

    def centred(self, rows: Floats) -> Floats:
        """Estimates of contrasts as floats, from means about the centre."""

    def estimable(self, rows: Floats) -> npt.NDArray[np.bool_]:
        """Whether the trials there are can say each row."""

    def among(self, cells: Sequence[int]) -> tuple[int, float]:
        """Degrees of freedom and sum of squares of the differences among filled cells, those that can be estimated."""


@dataclass(frozen=True)
class CellFit:
    """Without blocks every filled cell speaks for itself, and estimates are exact until the last division."""

    study: ExactStudy

    def estimable(self, rows: Floats) -> npt.NDArray[np.bool_]:
        """Say which rows touch no empty cell."""
        touches: npt.NDArray[np.bool_] = np.any((rows != 0) & ~self.study.filled, axis=1)
        return ~touches

    def values(self, rows: Whole, denominator: int, *, of_mean: bool) -> list[Number]:
        """Combine exact cell means; a row that touches an empty cell is undefined."""
        known = self.estimable(rows)
        numbers = iter(self.study.combine(rows[known], denominator, of_mean=of_mean))
        return [next(numbers) if can else EMPTY_CELL for can in known]

    @cached_property
    def _one_over_n(self) -> Floats:
        n = self.study.n.astype(float)
        inverse: Floats = np.divide(1.0, n, out=np.full_like(n, np.nan), where=n > 0)
        return inverse

    def pooled_variance(self, rows: Floats) -> Floats:
        """Sum of squared coefficients over n."""
        variance: Floats = np.where(rows != 0, rows**2 * self._one_over_n, 0.0).sum(axis=1)
        return variance

    def own_variance(self, rows: Floats) -> list[tuple[Number, Number]]:
        """Sum of k² v / n with Satterthwaite's degrees of freedom (Satterthwaite 1946; Welch 1947)."""
        n, v = self.study.n, self.study.variances
        answers: list[tuple[Number, Number]] = []
        for row in rows:
            used = row != 0
            if np.any(n[used] == 0):
                answers.append((EMPTY_CELL, EMPTY_CELL))
            elif np.any(n[used] < 2):
                answers.append((LONE_TRIAL, LONE_TRIAL))
            else:
                parts = row[used] ** 2 * v[used] / n[used]
                whole = parts.sum()
                if whole <= 0:
                    answers.append((NO_SPREAD, NO_SPREAD))
                else:
                    answers.append((float(whole), float(whole**2 / (parts**2 / (n[used] - 1)).sum())))
        return answers

    def covariance(self, rows: Floats) -> Floats:
        """Weighted cross products of the coefficients."""
        return (rows * np.where(self.study.filled, self._one_over_n, 0.0)) @ rows.T

    def among(self, cells: Sequence[int]) -> tuple[int, float]:
        """Sum of n (mean - weighted mean)²: independent means need no more."""
        at = list(cells)
        n, means = self.study.n[at], self._about_centre[at]
        return len(at) - 1, float(n @ (means - n @ means / n.sum()) ** 2)

    @cached_property
    def _about_centre(self) -> Floats:
        means = np.zeros(len(self.study.cells))
        means[self.study.filled] = self.study.group_means
        return means

    def centred(self, rows: Floats) -> Floats:
        """Combine the means about the centre."""
        return rows @ self._about_centre


@dataclass(frozen=True)
class BlockFit:
    """With blocks: least squares on group means, blocks additive and averaged equally.

    ``cell_model`` (cells × columns) gives the expected cell means from the coefficients
    ``beta``; ``inverse`` is their covariance in units of the residual mean square;
    ``unseen`` (columns × d) spans what the trials say nothing about; ``dropped`` (cells × d)
    the terms that are aliased with blocks and so left out of the model.
    """

    study: ExactStudy
    cell_model: Floats
    beta: Floats
    inverse: Floats
    unseen: Floats
    dropped: Floats

    def estimable(self, rows: Floats) -> npt.NDArray[np.bool_]:
        """Say which rows have no part in what the trials say nothing about."""
        if not self.unseen.size:
            return np.ones(len(rows), dtype=bool)
        scale = np.abs(rows).sum(axis=1).clip(min=1e-300)
        share: Floats = np.abs(rows @ self.cell_model @ self.unseen).max(axis=1) / scale
        return share < _NEARLY_ZERO

    def values(self, rows: Whole, denominator: int, *, of_mean: bool) -> list[Number]:
        """Combine expected cell means, in floats; the centre is put back under a mean."""
        coefficients = rows.astype(float) / denominator
        known = self.estimable(coefficients)
        aliased = self._aliased(coefficients)
        base = self.study.value(self.study.centre.numerator, self.study.centre.denominator, of_mean=True)
        numbers = self.centred(coefficients) + (base if of_mean else 0.0)
        empty = np.any((rows != 0) & ~self.study.filled, axis=1)
        return [
            (EMPTY_CELL if hole else CONFOUNDED) if not can else ALIASED if lost else float(number)
            for number, can, lost, hole in zip(numbers, known, aliased, empty, strict=True)
        ]

    def _aliased(self, rows: Floats) -> npt.NDArray[np.bool_]:
        """Say which rows have a part in a term that the model left out: without it they would say something else."""
        if not self.dropped.size:
            return np.zeros(len(rows), dtype=bool)
        part: Floats = np.abs(rows @ self.dropped).max(axis=1)
        lost: npt.NDArray[np.bool_] = part > _NEARLY_ZERO * np.abs(rows).sum(axis=1).clip(min=1e-300)
        return lost

    def pooled_variance(self, rows: Floats) -> Floats:
        """Quadratic forms in the covariance of the coefficients."""
        parts = rows @ self.cell_model
        variance: Floats = np.einsum("ij,jk,ik->i", parts, self.inverse, parts)
        return variance

    def own_variance(self, rows: Floats) -> list[tuple[Number, Number]]:
        """Nothing: with blocks the error is the residual of the block model."""
        return [(BLOCKS_SHARE, BLOCKS_SHARE)] * len(rows)

    def covariance(self, rows: Floats) -> Floats:
        """Cross products through the covariance of the coefficients."""
        parts = rows @ self.cell_model
        return parts @ self.inverse @ parts.T

    def centred(self, rows: Floats) -> Floats:
        """Combine expected cell means about the centre."""
        return rows @ (self.cell_model @ self.beta)

    def among(self, cells: Sequence[int]) -> tuple[int, float]:
        """Give the quadratic form of orthonormal differences among the cells."""
        differences = np.zeros((len(cells) - 1, len(self.study.cells)))
        differences[:, list(cells)] = orthonormal(len(cells)).T
        differences = differences[self.estimable(differences)]
        values, covariance = self.centred(differences), self.covariance(differences)
        # Differences that only a dropped term would tell apart are 0 in the model, with no variance of their own.
        rank = int(np.linalg.matrix_rank(covariance, hermitian=True)) if len(values) else 0
        return rank, float(values @ np.linalg.pinv(covariance, hermitian=True) @ values) if rank else 0.0
