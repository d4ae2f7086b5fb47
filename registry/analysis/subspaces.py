"""Growing a model column by column: ranks, projections and the sums of squares they take up."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
_RANK_TOLERANCE = 1e-9


@dataclass(frozen=True)
class Gain:
    """What columns add to a model: degrees of freedom, the sum of squares they take up, and the model grown."""

    df: int
    ss: float
    model: Floats


@dataclass(frozen=True)
class WeightedCells:
    """Group means with weights: n readings each; the ground on which models grow.

    A sum of squares of raw readings on a model of groups is one of √n-weighted group
    means on the same model, so nothing here needs the readings.
    """

    weights: Floats
    means: Floats

    def start(self) -> Floats:
        """Give the model of one common mean, as an orthonormal column."""
        root = np.sqrt(self.weights)
        column: Floats = (root / np.linalg.norm(root))[:, None]
        return column

    def grow(self, model: Floats, columns: Floats) -> Gain:
        """Add columns to an orthonormal model.

        The sum of squares is that of the part of the means along what is new: a sum of
        squares first, never a difference of two large ones.
        """
        if columns.shape[1] == 0:
            return Gain(0, 0.0, model)
        root = np.sqrt(self.weights)[:, None]
        weighted = columns * root
        scale = np.linalg.norm(weighted, axis=0).max()
        fresh = weighted - model @ (model.T @ weighted)
        fresh -= model @ (model.T @ fresh)  # Twice is enough (Giraud, Langou & Rozloznik 2005).
        left, sizes, _ = np.linalg.svd(fresh, full_matrices=False)
        new = left[:, sizes > _RANK_TOLERANCE * scale]
        along = new.T @ (self.means * root[:, 0])
        return Gain(new.shape[1], float(along @ along), np.hstack([model, new]))

    def left_over(self, model: Floats) -> float:
        """Sum of squares of the means about a model."""
        weighted = self.means * np.sqrt(self.weights)
        rest = weighted - model @ (model.T @ weighted)
        return float(rest @ rest)


def stack(parts: Sequence[Floats], rows: int) -> Floats:
    """Set columns side by side; no part at all gives none."""
    return np.hstack(list(parts)) if parts else np.zeros((rows, 0))
