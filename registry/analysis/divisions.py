"""The three ways to divide a sum of squares among terms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import prod

import numpy as np
import numpy.typing as npt

from registry.analysis.coefficients import contrast_rows, offset_rows, orthonormal, term_columns
from registry.analysis.exact import ExactStudy
from registry.analysis.fits import BlockFit, CellFit, Fit
from registry.analysis.subspaces import WeightedCells, stack
from registry.analysis.undefined import ALIASED, EMPTY_CELL, EQUAL_WEIGHT_BLOCK, Undefined
from registry.trials.terms import Term, all_terms

Floats = npt.NDArray[np.float64]
SS = Fraction | float | Undefined


@dataclass(frozen=True)
class Share:
    """What one division gives a term: its degrees of freedom and sum of squares."""

    df: int
    ss: SS


@dataclass(frozen=True)
class TermShares:
    """A term's part in each division; ``full_df`` is what a complete study would have."""

    term: Term
    full_df: int
    sequential: Share
    hierarchical: Share
    equal_weight: Share
    aliased: bool = False

    @property
    def df(self) -> int:
        """Degrees of freedom that can be estimated."""
        return self.sequential.df


@dataclass(frozen=True)
class Division:
    """All terms divided, the block's share apart, what the model leaves over, and the fit behind means."""

    terms: tuple[TermShares, ...]
    block: TermShares | None
    residual_ss: Fraction | float
    residual_df: int
    fit: Fit


def divide(study: ExactStudy) -> Division:
    """Divide a study's sum of squares among its terms, sequentially, hierarchically and with equal weights.

    Sequential: each term after those listed before it. Hierarchical: each after every term
    that does not contain it. Equal-weight: what the term's equal-weight contrasts take up
    (Yates 1934, weighted squares of means; the quadratic form of Searle 1987). They are
    one and the same when the study is balanced, and then exact.
    """
    if study.layout.block is not None:
        return _divide_blocked(study)
    terms = all_terms(len(study.layout.factors))
    if study.balance == "balanced":
        shares = [_balanced(study, term) for term in terms]
    elif len(terms) == 1:
        shares = [_one_way(study)]
    else:
        shares = _unbalanced(study, terms)
    df = study.everything.n - int(study.filled.sum())
    return Division(tuple(shares), None, study.within_ss, df, CellFit(study))


def _full_df(study: ExactStudy, term: Term) -> int:
    return prod(study.layout.shape[at] - 1 for at in term)


def _balanced(study: ExactStudy, term: Term) -> TermShares:
    rows, denominator = offset_rows(study.layout, term)
    df = _full_df(study, term)
    share = Share(df, study.balanced_ss(rows, denominator))
    return TermShares(term, df, share, share, share)


def _one_way(study: ExactStudy) -> TermShares:
    """With one factor, between is total less within, exactly, however the trials fall."""
    share = Share(int(study.filled.sum()) - 1, study.total_ss - study.within_ss)
    equal = share if study.filled.all() else Share(0, EMPTY_CELL)
    return TermShares((0,), _full_df(study, (0,)), share, share, equal)


def _unbalanced(study: ExactStudy, terms: Sequence[Term]) -> list[TermShares]:
    cells = np.flatnonzero(study.filled)
    ground = WeightedCells(study.n[cells].astype(float), study.group_means)
    columns = {term: term_columns(study.layout, term)[cells] for term in terms}
    fit = CellFit(study)
    sequential = _in_order(ground, ground.start(), terms, columns)
    return [
        TermShares(
            term,
            _full_df(study, term),
            sequential[term],
            _after_all_without(ground, ground.start(), term, terms, columns),
            equal_weight_share(study, fit, term),
        )
        for term in terms
    ]


def _in_order(
    ground: WeightedCells, model: Floats, terms: Sequence[Term], columns: dict[Term, Floats]
) -> dict[Term, Share]:
    shares = {}
    for term in terms:
        gain = ground.grow(model, columns[term])
        shares[term], model = Share(gain.df, gain.ss), gain.model
    return shares


def _after_all_without(
    ground: WeightedCells, model: Floats, term: Term, terms: Sequence[Term], columns: dict[Term, Floats]
) -> Share:
    """Fit every term that does not contain this one, then see what this one adds."""
    others = [columns[other] for other in terms if not set(term) <= set(other)]
    base = ground.grow(model, stack(others, len(ground.means))).model
    gain = ground.grow(base, columns[term])
    return Share(gain.df, gain.ss)


def equal_weight_share(study: ExactStudy, fit: Fit, term: Term) -> Share:
    """Sum of squares of a term's equal-weight contrasts: (C m)' (C D C')⁻¹ (C m)."""
    rows = contrast_rows(study.layout, term)
    if not fit.estimable(rows).all():
        return Share(0, EMPTY_CELL)
    values = fit.centred(rows)
    return Share(len(rows), float(values @ np.linalg.solve(fit.covariance(rows), values)))


def _divide_blocked(study: ExactStudy) -> Division:
    """Blocks are additive and come first; terms aliased with them are dropped before anything is fitted."""
    block = study.layout.block
    blocks = np.array([group[0] for group in study.groups])
    cells = np.array([group[1] for group in study.groups])
    weights = np.array([float(tally.n) for _, _, tally in study.groups])
    ground = WeightedCells(weights, study.group_means)
    in_block = orthonormal(len(block.levels) if block else 1)[blocks]
    terms = all_terms(len(study.layout.factors))
    over_cells = {term: term_columns(study.layout, term) for term in terms}
    columns = {term: over_cells[term][cells] for term in terms}

    first = ground.grow(ground.start(), in_block)
    gone = {term for term in terms if _aliased(ground, first.model, columns[term])}
    stay = [term for term in terms if term not in gone]
    sequential = _in_order(ground, first.model, stay, columns)
    full = ground.grow(first.model, stack([columns[term] for term in stay], len(cells)))
    lost = stack([over_cells[term] for term in sorted(gone)], len(study.cells))
    fit = _block_fit(study, ground, in_block, [over_cells[term] for term in stay], cells, lost)
    shares = [
        TermShares(
            term,
            _full_df(study, term),
            sequential[term],
            _after_all_without(ground, first.model, term, stay, columns),
            equal_weight_share(study, fit, term),
        )
        if term in sequential
        else _aliased_shares(study, term)
        for term in terms
    ]
    without_block = ground.grow(ground.start(), stack([columns[term] for term in stay], len(cells)))
    last = ground.grow(without_block.model, in_block)
    block_shares = TermShares(
        (), in_block.shape[1], Share(first.df, first.ss), Share(last.df, last.ss), Share(0, EQUAL_WEIGHT_BLOCK)
    )
    residual_ss: Fraction | float = study.within_ss
    left_over = len(study.groups) - full.model.shape[1]
    if left_over:
        residual_ss = float(study.within_ss) + ground.left_over(full.model)
    return Division(tuple(shares), block_shares, residual_ss, study.everything.n - full.model.shape[1], fit)


def _aliased(ground: WeightedCells, with_blocks: Floats, columns: Floats) -> bool:
    """Whether a term adds something to the mean alone, and nothing once blocks are fitted."""
    alone = ground.grow(ground.start(), columns).df
    return alone > 0 and ground.grow(with_blocks, columns).df == 0


def _aliased_shares(study: ExactStudy, term: Term) -> TermShares:
    none = Share(0, ALIASED)
    return TermShares(term, _full_df(study, term), none, none, none, aliased=True)


def _block_fit(
    study: ExactStudy,
    ground: WeightedCells,
    in_block: Floats,
    over_cells: list[Floats],
    cells: npt.NDArray[np.int64],
    dropped: Floats,
) -> BlockFit:
    ones = np.full((len(study.cells), 1), 1.0 / np.sqrt(len(study.cells)))
    treatment = np.hstack([ones, *over_cells])
    # Block columns sum to zero over blocks, so an equal average of the blocks leaves them out of a cell's mean.
    cell_model = np.hstack([treatment, np.zeros((len(study.cells), in_block.shape[1]))])
    design = np.hstack([treatment[cells], in_block])
    root = np.sqrt(ground.weights)
    left, sizes, right = np.linalg.svd(design * root[:, None], full_matrices=True)
    seen = np.zeros(right.shape[0], dtype=bool)
    seen[: len(sizes)] = sizes > 1e-9 * sizes[0]
    kept = right[seen].T / sizes[seen[: len(sizes)]]
    beta = kept @ (left[:, : len(sizes)][:, seen[: len(sizes)]].T @ (ground.means * root))
    return BlockFit(study, cell_model, beta, kept @ kept.T, right[~seen].T, dropped)
