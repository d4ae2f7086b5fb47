"""The crossing of factors: every combination of levels, and the block beside it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import product

from registry.trials.factors import Factor

Cell = tuple[int, ...]


@dataclass(frozen=True)
class Layout:
    """Factors fully crossed; ``block`` stands apart, because it is not treated but allowed for."""

    factors: tuple[Factor, ...]
    block: Factor | None = None

    @cached_property
    def shape(self) -> tuple[int, ...]:
        """How many levels each factor has."""
        return tuple(len(factor.levels) for factor in self.factors)

    @cached_property
    def cells(self) -> tuple[Cell, ...]:
        """Every treatment cell as level places, the last factor changing fastest."""
        return tuple(product(*(range(count) for count in self.shape)))

    def levels_of(self, cell: Sequence[int]) -> dict[str, str]:
        """Name the level of every factor in a treatment cell."""
        return {factor.name: factor.levels[place] for factor, place in zip(self.factors, cell, strict=True)}
