"""Coefficients over cells: the linear functions of cell means that a decomposition is made of."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import lru_cache, reduce, wraps
from itertools import combinations, product
from math import prod
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

from registry.trials.layouts import Layout
from registry.trials.terms import Term

Whole = npt.NDArray[Any]
Floats = npt.NDArray[np.float64]


Answer = TypeVar("Answer")
# Coefficients of larger layouts take more room than the time they save.
MOST_REMEMBERED = 256


def remembered(make: Callable[[Layout, Term], Answer]) -> Callable[[Layout, Term], Answer]:
    """Remember what was made for small layouts: it depends on the layout alone, and nobody may change it."""
    keep = lru_cache(maxsize=1024)(make)

    @wraps(make)
    def given(layout: Layout, term: Term) -> Answer:
        return keep(layout, term) if prod(layout.shape) <= MOST_REMEMBERED else make(layout, term)

    return given


@remembered
def offset_rows(layout: Layout, term: Term) -> tuple[Whole, int]:
    """Coefficients of a term's offsets under sum-to-zero, equal weights.

    Row u belongs to one combination of the term's levels (last factor fastest); column c
    to one cell: k = (1/M) · product over the term's factors of (L·[same level] - 1), the
    rest averaged. Whole numbers, with M as their common denominator. The empty term gives
    the grand mean. Source: Searle 1987, Linear Models for Unbalanced Data, ch. 4.
    """
    parts = [
        size * np.eye(size, dtype=np.int64) - 1 if at in term else np.ones((1, size), dtype=np.int64)
        for at, size in enumerate(layout.shape)
    ]
    return reduce(np.kron, parts), prod(layout.shape)


@remembered
def mean_rows(layout: Layout, term: Term) -> tuple[Whole, int]:
    """Coefficients of the equal-weight means at each combination of the term's levels, with their denominator."""
    parts = [
        np.eye(size, dtype=np.int64) if at in term else np.ones((1, size), dtype=np.int64)
        for at, size in enumerate(layout.shape)
    ]
    return reduce(np.kron, parts), prod(size for at, size in enumerate(layout.shape) if at not in term)


@remembered
def contrast_rows(layout: Layout, term: Term) -> Floats:
    """Orthonormal contrasts of a term over cells, one row a degree of freedom: equal-weight averages of the rest."""
    parts = [
        orthonormal(size).T if at in term else np.full((1, size), 1.0 / size) for at, size in enumerate(layout.shape)
    ]
    return reduce(np.kron, parts)


def orthonormal(size: int) -> Floats:
    """Give size - 1 orthonormal columns that each sum to zero (Helmert's)."""
    columns = np.zeros((size, size - 1))
    for column in range(1, size):
        columns[:column, column - 1] = 1.0
        columns[column, column - 1] = -float(column)
        columns[:, column - 1] /= np.sqrt(column * (column + 1.0))
    return columns


@remembered
def term_columns(layout: Layout, term: Term) -> Floats:
    """Model columns of a term over cells, effect-coded and orthonormal where every cell is filled."""
    parts = [
        orthonormal(size) if at in term else np.full((size, 1), 1.0 / np.sqrt(size))
        for at, size in enumerate(layout.shape)
    ]
    return reduce(np.kron, parts)


def term_levels(layout: Layout, term: Term) -> list[dict[str, str]]:
    """Name each combination of a term's levels, in the order of the rows above."""
    factors = [layout.factors[at] for at in term]
    return [
        {factor.name: level for factor, level in zip(factors, levels, strict=True)}
        for levels in product(*(factor.levels for factor in factors))
    ]


def named(levels: Mapping[str, str]) -> str:
    """Write a combination: walk=return, batch=12."""
    return ", ".join(f"{factor}={level}" for factor, level in levels.items())


def pair_rows(rows: Whole) -> tuple[Whole, list[tuple[int, int]]]:
    """Differences of every pair of rows, later minus earlier, and which pair each is."""
    pairs = [(first, second) for first in range(len(rows)) for second in range(first + 1, len(rows))]
    return np.array([rows[second] - rows[first] for first, second in pairs]), pairs


@remembered
def interaction_rows(layout: Layout, pair: Term) -> tuple[Whole, list[tuple[tuple[int, int], tuple[int, int]]]]:
    """Coefficients of every 2 × 2 interaction contrast of two factors, and the levels that are its corners.

    A difference of differences: later minus earlier level of the first factor, at the
    later level of the second, less the same at the earlier. Whole numbers, to be divided
    by how many cells each corner averages over.
    """
    first, second = pair
    between = [list(combinations(range(size), 2)) for size in layout.shape]
    parts = [
        np.array([_difference(size, *levels) for levels in between[at]], dtype=np.int64).reshape(-1, size)
        if at in pair
        else np.ones((1, size), dtype=np.int64)
        for at, size in enumerate(layout.shape)
    ]
    corners = [(one, other) for one in between[first] for other in between[second]]
    return reduce(np.kron, parts), corners


def _difference(size: int, earlier: int, later: int) -> list[int]:
    return [int(at == later) - int(at == earlier) for at in range(size)]


def slice_cells(layout: Layout, factor: int) -> list[tuple[dict[str, str], Sequence[int]]]:
    """List the cells of every slice along one factor: the levels of the others, and the cells in level order."""
    others = tuple(at for at in range(len(layout.factors)) if at != factor)
    places = np.arange(prod(layout.shape)).reshape(layout.shape)
    moved = np.moveaxis(places, factor, -1).reshape(-1, layout.shape[factor])
    return [
        (levels, [int(at) for at in cells]) for levels, cells in zip(term_levels(layout, others), moved, strict=True)
    ]
