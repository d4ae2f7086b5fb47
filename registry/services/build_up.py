"""The build-up table: what each mean of a crossed table is built of, offset by offset."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from registry.analysis.results import Decomposition, MarginalMean, TermResult
from registry.analysis.undefined import Undefined
from registry.services.figures import Interval, figure, interval
from registry.trials.terms import term_name


@dataclass(frozen=True)
class Part:
    """One step of a build-up: which term it belongs to, and its offset with interval."""

    term: str
    offset: Interval


@dataclass(frozen=True)
class BuiltMean:
    """A mean and what it is built of: the grand mean, then its parts in order."""

    levels: Mapping[str, str]
    n: int
    mean: Interval
    parts: tuple[Part, ...]


@dataclass(frozen=True)
class BuildUp:
    """One factor crossed with another, averaged equally over the rest; one factor alone has no columns."""

    row_factor: str
    column_factor: str | None
    rows: tuple[str, ...]
    columns: tuple[str, ...]
    cells: tuple[tuple[BuiltMean, ...], ...]
    row_means: tuple[BuiltMean, ...]
    column_means: tuple[BuiltMean, ...]
    grand: Interval
    averaged_over: tuple[str, ...]


def build_up(result: Decomposition, *, row: str | None, column: str | None) -> BuildUp:
    """Cross two factors of a decomposition; unknown or missing names fall to the first two in order."""
    names = [factor.name for factor in result.layout.factors]
    row_factor = row if row in names else names[0]
    others = [name for name in names if name != row_factor]
    column_factor = column if column in others else (others[0] if others else None)
    levels = {factor.name: factor.levels for factor in result.layout.factors}
    means = {_key(mean.levels): mean for mean in result.marginal_means}
    terms = {frozenset(term.factors): term for term in result.terms if term.role == "treatment"}

    def built(chosen: Mapping[str, str]) -> BuiltMean:
        return _built(chosen, means, terms, names)

    rows = levels[row_factor]
    columns = levels[column_factor] if column_factor else ()
    return BuildUp(
        row_factor=row_factor,
        column_factor=column_factor,
        rows=rows,
        columns=columns,
        cells=tuple(
            tuple(built({row_factor: one, column_factor: other}) for other in columns) if column_factor else ()
            for one in rows
        ),
        row_means=tuple(built({row_factor: one}) for one in rows),
        column_means=tuple(built({column_factor: other}) for other in columns) if column_factor else (),
        grand=interval(result.equal_weight),
        averaged_over=tuple(name for name in names if name not in (row_factor, column_factor)),
    )


def _key(levels: Mapping[str, str]) -> frozenset[tuple[str, str]]:
    return frozenset(levels.items())


def _built(
    chosen: Mapping[str, str],
    means: Mapping[frozenset[tuple[str, str]], MarginalMean],
    terms: Mapping[frozenset[str], TermResult],
    names: Sequence[str],
) -> BuiltMean:
    mean = means[_key(chosen)]
    ordered = [name for name in names if name in chosen]
    parts = [_part(terms, [name], chosen) for name in ordered]
    if len(ordered) == 2:
        parts.append(_part(terms, ordered, chosen))
    return BuiltMean(dict(chosen), mean.n, interval(mean.equal_weight), tuple(parts))


def _part(terms: Mapping[frozenset[str], TermResult], names: Sequence[str], chosen: Mapping[str, str]) -> Part:
    term = terms[frozenset(names)]
    wanted = {name: chosen[name] for name in names}
    for offset in term.offsets:
        if dict(offset.levels) == wanted:
            return Part(term_name(term.factors), interval(offset.value))
    reason = term.sequential.ss.reason if isinstance(term.sequential.ss, Undefined) else "it cannot be estimated"
    return Part(term_name(term.factors), Interval(*(figure(Undefined(reason)),) * 4))
