"""The exact part of a decomposition: everything that integers can say before the first float."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import lcm, prod
from typing import Any

import numpy as np
import numpy.typing as npt

from registry.analysis.results import Balance
from registry.errors import Fault, InputRefused
from registry.trials.layouts import Layout
from registry.trials.tallies import EMPTY, TalliedStudy, Tally

Floats = npt.NDArray[np.float64]
Whole = npt.NDArray[Any]  # Python integers, unbounded.


@dataclass(frozen=True)
class ExactStudy:
    """A tallied study as integers; cells in the order of ``layout.cells``, groups are (block, cell).

    Sums are of d = reading - anchor in steps. ``step`` turns steps into response units.
    """

    layout: Layout
    step: Fraction
    anchor: int
    groups: tuple[tuple[int, int, Tally], ...]
    cells: tuple[Tally, ...]

    @classmethod
    def of(cls, study: TalliedStudy) -> ExactStudy:
        """Arrange a tallied study; refuses one without any reading."""
        place = {cell: at for at, cell in enumerate(study.layout.cells)}
        sums = [EMPTY] * len(place)
        groups: list[tuple[int, int, Tally]] = []
        for key in sorted(study.tallies):
            tally = study.tallies[key]
            if tally.n == 0:
                continue
            block, cell = (key[0], key[1:]) if study.layout.block else (0, key)
            groups.append((block, place[cell], tally))
            sums[place[cell]] = sums[place[cell]].merge(tally)
        if not groups:
            raise InputRefused(Fault("study", "no reading counts", "log or restore at least one"))
        return cls(study.layout, study.step, study.anchor, tuple(groups), tuple(sums))

    @cached_property
    def everything(self) -> Tally:
        """All readings in one tally."""
        whole = EMPTY
        for cell in self.cells:
            whole = whole.merge(cell)
        return whole

    @cached_property
    def n(self) -> npt.NDArray[np.int64]:
        """Readings in each cell."""
        return np.array([cell.n for cell in self.cells], dtype=np.int64)

    @cached_property
    def filled(self) -> npt.NDArray[np.bool_]:
        """Which cells have a reading."""
        return self.n > 0

    @cached_property
    def centre(self) -> Fraction:
        """The mean as logged, in steps from the anchor; taken off before anything becomes a float."""
        return Fraction(self.everything.total, self.everything.n)

    @cached_property
    def total_ss(self) -> Fraction:
        """Sum of squares about the mean as logged, in squared response units."""
        whole = self.everything
        return self.step**2 * (whole.squares - Fraction(whole.total**2, whole.n))

    @cached_property
    def within_ss(self) -> Fraction:
        """Sum of squares within groups, in squared response units."""
        within = sum(
            (Fraction(tally.n * tally.squares - tally.total**2, tally.n) for _, _, tally in self.groups), Fraction(0)
        )
        return self.step**2 * within

    @cached_property
    def denominator(self) -> int:
        """A common denominator of the cell means."""
        return lcm(*(cell.n for cell in self.cells if cell.n))

    @cached_property
    def numerators(self) -> Whole:
        """Cell means from the anchor, in steps, times the common denominator; 0 stands at an empty cell."""
        values = np.empty(len(self.cells), dtype=object)
        values[:] = [cell.total * (self.denominator // cell.n) if cell.n else 0 for cell in self.cells]
        return values

    @cached_property
    def variances(self) -> Floats:
        """The variance within each cell in squared response units; NaN where there are not two readings."""
        return np.array(
            [
                float(self.step**2 * Fraction(cell.n * cell.squares - cell.total**2, cell.n * (cell.n - 1)))
                if cell.n > 1
                else np.nan
                for cell in self.cells
            ]
        )

    @cached_property
    def balance(self) -> Balance:
        """Say how the trials are spread over the treatment cells."""
        counts = self.n.reshape(self.layout.shape).astype(object)
        if (counts == 0).any():
            return "empty cells"
        if (counts == counts.flat[0]).all():
            return "balanced"
        axes = range(counts.ndim)
        margins = [counts.sum(axis=tuple(other for other in axes if other != axis)) for axis in axes]
        expected = margins[0]
        for margin in margins[1:]:
            expected = np.multiply.outer(expected, margin)
        return "proportional" if (expected == counts * counts.sum() ** (counts.ndim - 1)).all() else "unbalanced"

    def value(self, numerator: int, denominator: int, *, of_mean: bool) -> float:
        """Turn an exact number of steps into response units, rounded once; a mean gets its anchor back."""
        if of_mean:
            numerator += self.anchor * denominator
        # Python divides whole numbers with one correct rounding.
        return (numerator * self.step.numerator) / (denominator * self.step.denominator)

    def combine(self, rows: Whole, denominator: int, *, of_mean: bool) -> list[float]:
        """Combine cell means by whole-number coefficients: row i gives sum(rows[i] * mean) / denominator."""
        sums = rows.astype(object) @ self.numerators
        scale = denominator * self.denominator
        return [self.value(int(total), scale, of_mean=of_mean) for total in sums]

    def mean_as_logged(self, cells: Sequence[int]) -> tuple[int, float]:
        """Give the number of readings in some cells and their plain mean; cells must hold a reading."""
        n = sum(self.cells[at].n for at in cells)
        return n, self.value(sum(self.cells[at].total for at in cells), n, of_mean=True)

    @cached_property
    def group_means(self) -> Floats:
        """Means of the groups about the centre, in response units."""
        return np.array(
            [float(self.step * (Fraction(tally.total, tally.n) - self.centre)) for _, _, tally in self.groups]
        )

    def balanced_ss(self, rows: Whole, denominator: int) -> Fraction:
        """Sum of squares of a term of a balanced study from its offsets' coefficients, exact.

        Each offset counts for the readings that share its levels: all cells over rows.
        """
        sums = rows.astype(object) @ self.numerators
        squares = sum(int(total) ** 2 for total in sums)
        share = Fraction(prod(self.layout.shape) * int(self.n[0]), len(rows))
        return self.step**2 * share * Fraction(squares, (denominator * self.denominator) ** 2)
