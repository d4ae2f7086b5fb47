"""Run orders: balanced wherever they are broken off, and drawn again from their seed."""

from __future__ import annotations

from collections import Counter

from hypothesis import given
from hypothesis import strategies as st

from registry.planning.orders import complete_sets

BLOCKS = st.lists(st.integers(1, 6), min_size=1, max_size=3).map(
    lambda sizes: [[f"{block}/{cell}" for cell in range(size)] for block, size in enumerate(sizes)]
)


@given(BLOCKS, st.integers(1, 5), st.integers(0, 2**31))
def test_every_cell_stands_once_in_every_set(blocks: list[list[str]], per_cell: int, seed: int) -> None:
    order = complete_sets(blocks, per_cell=per_cell, seed=seed)

    size = sum(len(block) for block in blocks)
    for start in range(0, len(order), size):
        assert sorted(order[start : start + size]) == sorted(cell for block in blocks for cell in block)
    assert set(Counter(order).values()) == {per_cell}


@given(BLOCKS, st.integers(0, 2**31))
def test_within_a_set_the_cells_of_a_block_stand_together(blocks: list[list[str]], seed: int) -> None:
    order = complete_sets(blocks, per_cell=1, seed=seed)

    assert [cell.partition("/")[0] for cell in order] == sorted(cell.partition("/")[0] for cell in order)


@given(BLOCKS, st.integers(0, 2**31))
def test_the_same_seed_draws_the_same_order(blocks: list[list[str]], seed: int) -> None:
    assert complete_sets(blocks, per_cell=3, seed=seed) == complete_sets(blocks, per_cell=3, seed=seed)


def test_another_seed_draws_another_order() -> None:
    cells = [[f"{cell}" for cell in range(12)]]
    drawn = {tuple(complete_sets(cells, per_cell=1, seed=seed)) for seed in range(50)}

    # 12! orders: fifty draws are all different.
    assert len(drawn) == 50


def test_every_place_of_a_set_is_as_likely_for_every_cell() -> None:
    # 6,000 sets of 3: each cell is expected 2,000 times in each place, with a standard deviation of about 37.
    order = complete_sets([["a", "b", "c"]], per_cell=6000, seed=20261201)
    places = Counter((cell, at % 3) for at, cell in enumerate(order))

    assert all(abs(count - 2000) < 6 * 37 for count in places.values())
