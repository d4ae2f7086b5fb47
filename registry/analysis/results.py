"""Results of a decomposition, as frozen records."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from registry.analysis.undefined import Number
from registry.trials.layouts import Layout

ErrorPolicy = Literal["pooled", "per-cell"]
Balance = Literal["balanced", "proportional", "unbalanced", "empty cells"]


@dataclass(frozen=True)
class Estimate:
    """A mean, an offset or a difference in response units, with its standard error and interval."""

    estimate: Number
    se: Number
    df: Number
    lower: Number
    upper: Number


@dataclass(frozen=True)
class CellSummary:
    """One treatment cell, summed over blocks: trials, mean, standard deviation."""

    levels: Mapping[str, str]
    n: int
    mean: Number
    sd: Number


@dataclass(frozen=True)
class SumOfSquares:
    """One division's line for a term: ss in squared response units, ms = ss / df, f = ms / residual ms."""

    df: int
    ss: Number
    ms: Number
    f: Number
    p: Number


@dataclass(frozen=True)
class OwnSpreadTest:
    """A term tested with each combination's own spread: F on df1 and df2 degrees of freedom."""

    f: Number
    df1: int
    df2: Number
    p: Number


@dataclass(frozen=True)
class Offset:
    """How far one combination of a term's levels stands off what the lower terms add up to."""

    levels: Mapping[str, str]
    value: Estimate


@dataclass(frozen=True)
class TermResult:
    """One term; ``df`` is what can be estimated of ``full_df``."""

    factors: tuple[str, ...]
    role: Literal["treatment", "block"]
    df: int
    full_df: int
    sequential: SumOfSquares
    hierarchical: SumOfSquares
    equal_weight: SumOfSquares
    per_cell: OwnSpreadTest
    offsets: tuple[Offset, ...]


@dataclass(frozen=True)
class Residual:
    """What is left: ms estimates the spread, sd is its square root."""

    df: int
    ss: float
    ms: Number
    sd: Number


@dataclass(frozen=True)
class Total:
    """All variation about the mean as logged."""

    df: int
    ss: float


@dataclass(frozen=True)
class MarginalMean:
    """The mean at some levels of one or two factors, two ways: every combination equally, or as logged."""

    levels: Mapping[str, str]
    n: int
    equal_weight: Estimate
    as_logged: Estimate


@dataclass(frozen=True)
class FamilyInterval:
    """A difference's p and interval, adjusted for all pairs of its factor."""

    p: Number
    lower: Number
    upper: Number


@dataclass(frozen=True)
class Comparison:
    """Two levels of a factor: difference = mean(to) - mean(from) of equal-weight means.

    ``se`` and ``df`` follow the error policy; ``own_se`` and ``own_df`` are always those of
    each combination's own spread (Satterthwaite).
    """

    factor: str
    from_level: str
    to_level: str
    difference: Number
    se: Number
    df: Number
    p_unadjusted: Number
    tukey_kramer: FamilyInterval
    own_se: Number
    own_df: Number


@dataclass(frozen=True)
class InteractionContrast:
    """How much a difference changes: (second - first of one factor) at the second level of another, less at its first.

    Averaged equally over the levels of all other factors, in response units.
    """

    factors: tuple[str, str]
    levels: tuple[tuple[str, str], tuple[str, str]]
    value: Estimate


@dataclass(frozen=True)
class SimpleEffect:
    """A factor's effect at one combination of all the others, against the error of the whole study."""

    factor: str
    at: Mapping[str, str]
    df: int
    f: Number
    p: Number


@dataclass(frozen=True)
class Decomposition:
    """A study taken apart: what mean, offsets and residual each cell is built of."""

    layout: Layout
    trials: int
    balance: Balance
    error: ErrorPolicy
    confidence: float
    equal_weight: Estimate
    as_logged: Estimate
    cells: tuple[CellSummary, ...]
    terms: tuple[TermResult, ...]
    residual: Residual
    total: Total
    r_squared: Number
    marginal_means: tuple[MarginalMean, ...]
    comparisons: tuple[Comparison, ...]
    interactions: tuple[InteractionContrast, ...]
    simple_effects: tuple[SimpleEffect, ...]
    notes: tuple[str, ...]
