"""A study taken apart: means, offsets, terms, residual, comparisons and slices."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import prod, sqrt
from typing import Any

import numpy as np
import numpy.typing as npt

from registry.analysis.coefficients import (
    contrast_rows,
    interaction_rows,
    mean_rows,
    offset_rows,
    pair_rows,
    slice_cells,
    term_levels,
)
from registry.analysis.distributions import (
    f_upper,
    studentized_range_quantile,
    studentized_range_upper,
    t_two_sided,
)
from registry.analysis.divisions import SS, Division, Share, TermShares
from registry.analysis.estimation import Estimator, root
from registry.analysis.exact import ExactStudy
from registry.analysis.notes import notes_of
from registry.analysis.own_spread import welch_james
from registry.analysis.results import (
    CellSummary,
    Comparison,
    Decomposition,
    ErrorPolicy,
    Estimate,
    FamilyInterval,
    InteractionContrast,
    MarginalMean,
    Offset,
    OwnSpreadTest,
    Residual,
    SimpleEffect,
    SumOfSquares,
    TermResult,
    Total,
)
from registry.analysis.undefined import BLOCKS_SHARE, EMPTY_CELL, NO_SPREAD, Number, Undefined
from registry.errors import Fault, InputRefused
from registry.trials.tallies import TalliedStudy
from registry.trials.terms import Term, all_terms

Whole = npt.NDArray[Any]
MOST_FACTORS = 6


def decompose(study: TalliedStudy, *, error: ErrorPolicy = "pooled", confidence: float = 0.95) -> Decomposition:
    """Say what each cell mean of a study is built of, and how sure that is.

    ``error`` picks the standard error of every mean, offset and comparison: "pooled" by
    the residual mean square, "per-cell" by Satterthwaite from each cell's own variance.
    Means, offsets and sums of squares of balanced studies are exact rationals rounded
    once; the cost does not depend on how many trials were logged. Raises InputRefused for
    a study without readings, with more than 6 factors, or a confidence not between 0 and 1.
    Sources: Searle 1987, Linear Models for Unbalanced Data; Yates 1934 JASA 29:51-66;
    Kramer 1956 Biometrics 12:307-310; Satterthwaite 1946 Biometrics Bulletin 2:110-114.
    """
    if not 1 <= len(study.layout.factors) <= MOST_FACTORS:
        raise InputRefused(Fault("factors", f"{len(study.layout.factors)} given", f"give 1 to {MOST_FACTORS}"))
    if not 0 < confidence < 1:
        raise InputRefused(Fault("confidence", f"{confidence} given", "give a number between 0 and 1, as 0.95"))
    return _Work(Estimator.of(study, error=error, confidence=confidence)).result()


@dataclass(frozen=True)
class _Work:
    """One decomposition under way: what estimates the study, and what is asked of it."""

    by: Estimator

    @property
    def exact(self) -> ExactStudy:
        """The study in whole numbers."""
        return self.by.exact

    @property
    def division(self) -> Division:
        """Its sum of squares, divided."""
        return self.by.division

    def result(self) -> Decomposition:
        """Put everything together."""
        spread = self.by.spread
        residual_sd = spread.ms if isinstance(spread.ms, Undefined) else sqrt(spread.ms)
        total_ss, residual_ss = self.exact.total_ss, self.division.residual_ss
        explained = 1 - residual_ss / total_ss if total_ss else None
        terms = [] if self.division.block is None else [self._block_term(self.division.block)]
        terms += [self._term(shares) for shares in self.division.terms]
        return Decomposition(
            layout=self.exact.layout,
            trials=self.exact.everything.n,
            balance=self.exact.balance,
            error=self.by.error,
            confidence=self.by.confidence,
            equal_weight=self.by.estimates(*mean_rows(self.exact.layout, ()), of_mean=True)[0],
            as_logged=self._as_logged(list(range(len(self.exact.cells)))),
            cells=tuple(self._cells()),
            terms=tuple(terms),
            residual=Residual(spread.df, float(residual_ss), spread.ms, residual_sd),
            total=Total(self.exact.everything.n - 1, float(total_ss)),
            r_squared=float(explained) if explained is not None else Undefined("the readings do not vary at all"),
            marginal_means=tuple(self._marginal_means()),
            comparisons=tuple(self._comparisons()),
            interactions=tuple(self._interactions()),
            simple_effects=tuple(self._simple_effects()),
            notes=tuple(notes_of(self.exact, self.division, self.by.error)),
        )

    def _cells(self) -> list[CellSummary]:
        summaries = []
        for at, (cell, tally) in enumerate(zip(self.exact.layout.cells, self.exact.cells, strict=True)):
            nothing = Undefined("no trials here")
            one = Undefined("a standard deviation needs two trials")
            summaries.append(
                CellSummary(
                    levels=self.exact.layout.levels_of(cell),
                    n=tally.n,
                    mean=self.exact.value(tally.total, tally.n, of_mean=True) if tally.n else nothing,
                    sd=sqrt(self.exact.variances[at]) if tally.n > 1 else one if tally.n else nothing,
                )
            )
        return summaries

    def _as_logged(self, cells: list[int]) -> Estimate:
        """Give the plain mean of all readings in some cells."""
        filled = [at for at in cells if self.exact.cells[at].n]
        if not filled:
            nothing = Undefined("no trials here")
            return Estimate(nothing, nothing, nothing, nothing, nothing)
        n, mean = self.exact.mean_as_logged(filled)
        if self.by.error == "per-cell":
            row = np.zeros((1, len(self.exact.cells)))
            row[0, filled] = self.exact.n[filled] / n
            variance, df = self.division.fit.own_variance(row)[0]
            return self.by.estimate(mean, root(variance), df)
        scale = self.by.spread.scale()
        if isinstance(scale, Undefined):
            return self.by.estimate(mean, scale, scale)
        return self.by.estimate(mean, sqrt(scale / n), float(self.by.spread.df))

    def _term(self, shares: TermShares) -> TermResult:
        names = tuple(self.exact.layout.factors[at].name for at in shares.term)
        return TermResult(
            names,
            "treatment",
            shares.df,
            shares.full_df,
            self._line(shares.sequential),
            self._line(shares.hierarchical),
            self._line(shares.equal_weight),
            welch_james(self.exact, contrast_rows(self.exact.layout, shares.term)),
            () if shares.aliased else tuple(self._offsets(shares.term)),
        )

    def _block_term(self, shares: TermShares) -> TermResult:
        block = self.exact.layout.block
        return TermResult(
            (block.name if block else "",),
            "block",
            shares.df,
            shares.full_df,
            self._line(shares.sequential),
            self._line(shares.hierarchical),
            self._line(shares.equal_weight),
            OwnSpreadTest(BLOCKS_SHARE, shares.df, BLOCKS_SHARE, BLOCKS_SHARE),
            (),
        )

    def _offsets(self, term: Term) -> list[Offset]:
        rows, denominator = offset_rows(self.exact.layout, term)
        estimates = self.by.estimates(rows, denominator, of_mean=False)
        levels = term_levels(self.exact.layout, term)
        return [Offset(level, estimate) for level, estimate in zip(levels, estimates, strict=True)]

    def _line(self, share: Share) -> SumOfSquares:
        ss: SS = share.ss
        if isinstance(ss, Undefined):
            return SumOfSquares(share.df, ss, ss, ss, ss)
        if share.df == 0:
            return SumOfSquares(0, EMPTY_CELL, EMPTY_CELL, EMPTY_CELL, EMPTY_CELL)
        f = self._ratio(ss, share.df)
        p = f if isinstance(f, Undefined) else f_upper(f, share.df, self.by.spread.df)
        return SumOfSquares(share.df, float(ss), float(ss / share.df), f, p)

    def _ratio(self, ss: Fraction | float, df: int) -> Number:
        """F, from sums of squares: exact until the last division where both are."""
        scale = self.by.spread.scale()
        if isinstance(scale, Undefined):
            return scale
        return float((ss / df) / (self.division.residual_ss / self.division.residual_df))

    def _marginal_means(self) -> list[MarginalMean]:
        layout = self.exact.layout
        terms = [term for term in all_terms(len(layout.factors)) if len(term) <= 2]
        means = []
        for term in terms:
            rows, denominator = mean_rows(layout, term)
            estimates = self.by.estimates(rows, denominator, of_mean=True)
            for levels, row, estimate in zip(term_levels(layout, term), rows, estimates, strict=True):
                cells = [int(at) for at in np.flatnonzero(row)]
                n = int(self.exact.n[cells].sum())
                means.append(MarginalMean(levels, n, estimate, self._as_logged(cells)))
        return means

    def _comparisons(self) -> list[Comparison]:
        comparisons: list[Comparison] = []
        for at, factor in enumerate(self.exact.layout.factors):
            if len(factor.levels) < 2:
                continue
            rows, denominator = mean_rows(self.exact.layout, (at,))
            differences, pairs = pair_rows(rows)
            values = self.division.fit.values(differences, denominator, of_mean=False)
            errors = self.by.errors(differences.astype(float) / denominator, values)
            rows = differences.astype(float) / denominator
            pooled, own = self.division.fit.pooled_variance(rows), self.division.fit.own_variance(rows)
            for value, (se, df), variance, (own_variance, own_df), (first, second) in zip(
                values, errors, pooled, own, pairs, strict=True
            ):
                comparisons.append(
                    Comparison(
                        factor.name,
                        factor.levels[first],
                        factor.levels[second],
                        value,
                        se,
                        df,
                        _unadjusted(value, se, df),
                        self._tukey_kramer(value, float(variance), len(factor.levels)),
                        root(own_variance),
                        own_df,
                    )
                )
        return comparisons

    def _tukey_kramer(self, value: Number, variance: float, means: int) -> FamilyInterval:
        """All pairs of a factor's levels at once, by the studentized range (Tukey 1953; Kramer 1956)."""
        scale = self.by.spread.scale()
        if isinstance(value, Undefined) or isinstance(scale, Undefined):
            reason = value if isinstance(value, Undefined) else scale
            return FamilyInterval(reason, reason, reason)
        se = sqrt(scale * variance)
        p = studentized_range_upper(abs(value) / se * sqrt(2), means, self.by.spread.df)
        reach = studentized_range_quantile(self.by.confidence, means, self.by.spread.df) / sqrt(2) * se
        return FamilyInterval(p, value - reach, value + reach)

    def _interactions(self) -> list[InteractionContrast]:
        factors = self.exact.layout.factors
        contrasts = []
        for first, second in combinations(range(len(factors)), 2):
            rows, pairs = interaction_rows(self.exact.layout, (first, second))
            if not pairs:
                continue
            denominator = prod(len(f.levels) for at, f in enumerate(factors) if at not in (first, second))
            estimates = self.by.estimates(rows, denominator, of_mean=False)
            for ((a, b), (c, d)), estimate in zip(pairs, estimates, strict=True):
                names = (factors[first].name, factors[second].name)
                one, other = factors[first].levels, factors[second].levels
                contrasts.append(InteractionContrast(names, ((one[a], one[b]), (other[c], other[d])), estimate))
        return contrasts

    def _simple_effects(self) -> list[SimpleEffect]:
        layout = self.exact.layout
        effects = []
        for at, factor in enumerate(layout.factors):
            if len(layout.factors) == 1:
                continue
            for levels, cells in slice_cells(layout, at):
                df, f = self._simple_effect(cells)
                p = f if isinstance(f, Undefined) else f_upper(f, df, self.by.spread.df)
                effects.append(SimpleEffect(factor.name, levels, df, f, p))
        return effects

    def _simple_effect(self, cells: Any) -> tuple[int, Number]:
        """F of the differences among the cells of one slice, those that can be estimated."""
        filled = [at for at in cells if self.exact.cells[at].n]
        if len(filled) < 2:
            return 0, EMPTY_CELL
        df, ss = self.division.fit.among(filled)
        if df == 0:
            return 0, EMPTY_CELL
        scale = self.by.spread.scale()
        return df, scale if isinstance(scale, Undefined) else ss / df / scale


def _unadjusted(value: Number, se: Number, df: Number) -> Number:
    if isinstance(value, Undefined) or isinstance(se, Undefined) or isinstance(df, Undefined):
        return next(part for part in (value, se, df) if isinstance(part, Undefined))
    return t_two_sided(value / se, df) if se > 0 else NO_SPREAD
