"""Notes beside a decomposition: what cannot be said, and which combinations are the reason."""

from __future__ import annotations

from collections.abc import Iterator

from registry.analysis.coefficients import named
from registry.analysis.divisions import Division, TermShares
from registry.analysis.exact import ExactStudy
from registry.analysis.results import ErrorPolicy
from registry.trials.terms import term_name

MOST_NAMED = 12


def notes_of(study: ExactStudy, division: Division, error: ErrorPolicy) -> Iterator[str]:
    """Say every limit of a decomposition in a sentence, naming the combinations without trials."""
    empty = [
        named(study.layout.levels_of(cell))
        for cell, tally in zip(study.layout.cells, study.cells, strict=True)
        if not tally.n
    ]
    missing = _missing(empty)
    for shares in division.terms:
        yield from _term_note(study, shares, missing)
    if empty:
        yield f"cannot estimate equal-weight tests, the grand mean and offsets with equal weights: {missing}"
    for shares in division.terms:
        if shares.hierarchical.df != shares.sequential.df:
            yield (
                f"{_name(study, shares)}: after all terms that do not contain it,"
                f" {shares.hierarchical.df} degrees of freedom are left"
            )
    if division.residual_df == 0:
        yield "no standard error, F or p: no combination has been run twice, so nothing shows the spread"
    elif division.residual_ss == 0:
        yield "no standard error, F or p: readings within a combination do not vary at all"
    if error == "per-cell" and study.layout.block is not None:
        yield "per-cell errors are absent: with blocks the error is the residual of the block model"
    elif error == "per-cell":
        yield from _own_spread_notes(study)


def _term_note(study: ExactStudy, shares: TermShares, missing: str) -> Iterator[str]:
    name = _name(study, shares)
    if shares.aliased:
        yield f"{name}: aliased with blocks"
    elif shares.df == 0:
        yield f"cannot estimate {name}: {missing or 'confounded with blocks'}"
    elif shares.df < shares.full_df:
        yield (
            f"{name}: {shares.df} of {shares.full_df} degrees of freedom can be estimated:"
            f" {missing or 'the rest is aliased with blocks'}"
        )


def _name(study: ExactStudy, shares: TermShares) -> str:
    return term_name([study.layout.factors[at].name for at in shares.term])


def _missing(empty: list[str]) -> str:
    if not empty:
        return ""
    more = f" and {len(empty) - MOST_NAMED} more" if len(empty) > MOST_NAMED else ""
    return "no trials at " + "; ".join(empty[:MOST_NAMED]) + more


def _own_spread_notes(study: ExactStudy) -> Iterator[str]:
    lone = [
        named(study.layout.levels_of(cell))
        for cell, tally in zip(study.layout.cells, study.cells, strict=True)
        if tally.n == 1
    ]
    if lone:
        more = f" and {len(lone) - MOST_NAMED} more" if len(lone) > MOST_NAMED else ""
        yield "no own spread with a single trial at " + "; ".join(lone[:MOST_NAMED]) + more
