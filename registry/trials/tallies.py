"""Exact integer tallies: count, sum, and sum of squares of the distances from an anchor."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from registry.trials.layouts import Layout

LIMB_BITS = 40
LIMB = 1 << LIMB_BITS
MAX_DISTANCE = 1 << 36
MAX_CELL_TRIALS = 1 << 27


@dataclass(frozen=True, slots=True)
class Tally:
    """What is known of one cell: n readings, the sum of d and the sum of d², d = reading - anchor in steps.

    A tally may also be a change: then its parts are signed.
    """

    n: int
    total: int
    squares: int

    def add(self, distance: int) -> Tally:
        """Count one more reading."""
        return Tally(self.n + 1, self.total + distance, self.squares + distance * distance)

    def remove(self, distance: int) -> Tally:
        """Take one reading out again."""
        return Tally(self.n - 1, self.total - distance, self.squares - distance * distance)

    def merge(self, other: Tally) -> Tally:
        """Count the readings of both."""
        return Tally(self.n + other.n, self.total + other.total, self.squares + other.squares)

    def less(self, other: Tally) -> Tally:
        """Take the readings of the other out."""
        return Tally(self.n - other.n, self.total - other.total, self.squares - other.squares)

    def rebased(self, shift: int) -> Tally:
        """Tell the same readings from an anchor that lies ``shift`` steps higher."""
        return Tally(
            self.n,
            self.total - self.n * shift,
            self.squares - 2 * shift * self.total + self.n * shift * shift,
        )

    def rescaled(self, factor: int) -> Tally:
        """Tell the same readings in a step that is ``factor`` times finer."""
        return Tally(self.n, self.total * factor, self.squares * factor * factor)


EMPTY = Tally(0, 0, 0)


def to_limbs(squares: int) -> tuple[int, int]:
    """Split a whole number into (high, low) in base 2**40, 0 ≤ low < 2**40; also below zero."""
    return squares >> LIMB_BITS, squares & (LIMB - 1)


def from_limbs(high: int, low: int) -> int:
    """Put the two limbs together again."""
    return (high << LIMB_BITS) + low


@dataclass(frozen=True)
class TalliedStudy:
    """Everything an analysis starts from: the layout, the grid readings lie on, and a tally a cell.

    Keys are cells of the layout, with the block's level put in front where there is a
    block; a key that is missing is an empty cell.
    """

    layout: Layout
    step: Fraction
    anchor: int
    tallies: Mapping[tuple[int, ...], Tally]
