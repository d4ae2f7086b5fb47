"""Terms: which factors act together, in the order in which they are reported."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

Term = tuple[int, ...]


def all_terms(factors: int) -> tuple[Term, ...]:
    """List every term of so many factors: by number of factors, then in order of combinations."""
    return tuple(term for size in range(1, factors + 1) for term in combinations(range(factors), size))


def term_name(names: Sequence[str]) -> str:
    """Write a term: walk × batch."""
    return " × ".join(names)
