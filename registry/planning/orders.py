"""Run orders: complete sets of all combinations, each set shuffled, within blocks."""

from __future__ import annotations

from collections.abc import Sequence
from random import Random
from typing import TypeVar

Cell = TypeVar("Cell")
METHOD = "complete sets, each shuffled within its block; Python random.Random(seed).shuffle"


def complete_sets(blocks: Sequence[Sequence[Cell]], *, per_cell: int, seed: int) -> list[Cell]:
    """Draw the order in which every cell is run ``per_cell`` times.

    ``blocks`` lists the cells of each block, one list when there is none. One set after
    another holds every cell once, so that the order stays balanced wherever it is broken
    off; within a set the blocks follow each other and the cells of each are shuffled. The
    same seed draws the same order. Source of complete-set randomisation: Cochran & Cox
    1957, Experimental Designs, ch. 4 (randomised complete blocks).
    """
    rng = Random(seed)  # noqa: S311 - an order has to be drawn again from its seed, not kept secret.
    order: list[Cell] = []
    for _ in range(per_cell):
        for block in blocks:
            cells = list(block)
            rng.shuffle(cells)
            order += cells
    return order
