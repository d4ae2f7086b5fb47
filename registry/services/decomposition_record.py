"""A decomposition as the record that people script against: weftbook.decomposition/1."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from registry.analysis.own_spread import games_howell
from registry.analysis.results import (
    Decomposition,
    Estimate,
    FamilyInterval,
    SumOfSquares,
    TermResult,
)
from registry.analysis.shares import BELOW_NOISE, Shares, shares_of
from registry.analysis.undefined import Number, Undefined
from registry.analysis.unreplicated import Screening, screening
from registry.trials.terms import term_name

FORMAT = "weftbook.decomposition/1"


def as_record(result: Decomposition, *, response: str, step: str, notes: tuple[str, ...] = ()) -> dict[str, Any]:
    """Write a decomposition as plain values; what is undefined is null, its reason among the notes."""
    sizes = {factor.name: len(factor.levels) for factor in result.layout.factors}
    shares = {term.factors: shares_of(result, term) for term in result.terms if term.role == "treatment"}
    screened = screening(result) if result.residual.df == 0 else None
    return {
        "format": FORMAT,
        "response": response,
        "trials": result.trials,
        "step": step,
        "balance": result.balance,
        "error": result.error,
        "confidence": result.confidence,
        "grand_mean": {"equal_weight": _estimate(result.equal_weight), "as_logged": _estimate(result.as_logged)},
        "cells": [
            {"levels": dict(cell.levels), "n": cell.n, "mean": _number(cell.mean), "sd": _number(cell.sd)}
            for cell in result.cells
        ],
        "terms": [_term(term, shares.get(term.factors)) for term in result.terms],
        "residual": {
            "df": result.residual.df,
            "ss": result.residual.ss,
            "ms": _number(result.residual.ms),
            "sd": _number(result.residual.sd),
        },
        "total": {"df": result.total.df, "ss": result.total.ss},
        "r_squared": _number(result.r_squared),
        "marginal_means": [
            {
                "levels": dict(mean.levels),
                "n": mean.n,
                "equal_weight": _estimate(mean.equal_weight),
                "as_logged": _estimate(mean.as_logged),
            }
            for mean in result.marginal_means
        ],
        "comparisons": [
            {
                "factor": pair.factor,
                "from": pair.from_level,
                "to": pair.to_level,
                "difference": _number(pair.difference),
                "se": _number(pair.se),
                "df": _number(pair.df),
                "p_unadjusted": _number(pair.p_unadjusted),
                "tukey_kramer": _family(pair.tukey_kramer),
                "games_howell": _family(games_howell(pair, levels=sizes[pair.factor], confidence=result.confidence)),
            }
            for pair in result.comparisons
        ],
        "interaction_contrasts": [
            {
                "factors": list(contrast.factors),
                "levels": [list(pair) for pair in contrast.levels],
                **_estimate(contrast.value),
            }
            for contrast in result.interactions
        ],
        "simple_effects": [
            {
                "factor": effect.factor,
                "at": dict(effect.at),
                "df": effect.df,
                "f": _number(effect.f),
                "p": _number(effect.p),
            }
            for effect in result.simple_effects
        ],
        **({"unreplicated": _screening(screened)} if screened is not None else {}),
        "notes": [*result.notes, *_more_notes(result, shares, screened), *notes],
    }


def _more_notes(
    result: Decomposition, shares: Mapping[tuple[str, ...], Shares], screened: Screening | Undefined | None
) -> Iterator[str]:
    """Say why the entries that only a record holds are null, or stand at 0."""
    for term in result.terms:
        found = shares.get(term.factors)
        if found is not None and found.below_noise:
            yield f"{term_name(term.factors)}: omega squared is 0, {BELOW_NOISE}"
    reasons = dict.fromkeys(
        term.per_cell.f.reason
        for term in result.terms
        if isinstance(term.per_cell.f, Undefined) and term.role == "treatment"
    )
    yield from (f"per-cell F and Games-Howell: {reason}" for reason in reasons)
    if isinstance(screened, Undefined):
        yield f"unreplicated: {screened.reason}"


def _screening(screened: Screening | Undefined) -> dict[str, Any] | None:
    if isinstance(screened, Undefined):
        return None
    return {
        "pse": screened.pse,
        "margin_of_error": screened.margin_of_error,
        "simultaneous_margin": screened.simultaneous_margin,
        "contrasts": [
            {
                "factors": list(each.factors),
                "estimate": each.estimate,
                "ratio_to_pse": each.ratio_to_pse,
                "p_simulated": each.p_simulated,
            }
            for each in screened.contrasts
        ],
    }


def _family(family: FamilyInterval) -> dict[str, float | None]:
    return {"p": _number(family.p), "lower": _number(family.lower), "upper": _number(family.upper)}


def _number(value: Number) -> float | None:
    return None if isinstance(value, Undefined) else value


def _estimate(value: Estimate) -> dict[str, float | None]:
    return {
        "estimate": _number(value.estimate),
        "se": _number(value.se),
        "df": _number(value.df),
        "lower": _number(value.lower),
        "upper": _number(value.upper),
    }


def _term(term: TermResult, shares: Shares | None) -> dict[str, Any]:
    record: dict[str, Any] = {"factors": list(term.factors)}
    if term.role == "block":
        record["role"] = "block"
    # A term of which nothing can be estimated has its numbers null, the count of them too.
    record["df"] = term.df or None
    for name, line in (
        ("sequential", term.sequential),
        ("hierarchical", term.hierarchical),
        ("equal_weight", term.equal_weight),
    ):
        record[name] = _line(line)
        # The three agree on the degrees of freedom but where empty combinations or blocks come between.
        if line.df not in (term.df, 0):
            record[name]["df"] = line.df
    own = term.per_cell
    record["per_cell"] = {
        "f": _number(own.f),
        "df1": None if isinstance(own.f, Undefined) else own.df1,
        "df2": _number(own.df2),
        "p": _number(own.p),
    }
    if shares is not None:
        record["partial_eta_squared"] = {
            "estimate": _number(shares.partial),
            "lower": _number(shares.lower),
            "upper": _number(shares.upper),
        }
        record["omega_squared"] = {"total": _number(shares.omega), "partial": _number(shares.partial_omega)}
    record["offsets"] = [{"levels": dict(offset.levels), **_estimate(offset.value)} for offset in term.offsets]
    return record


def _line(line: SumOfSquares) -> dict[str, Any]:
    return {"ss": _number(line.ss), "ms": _number(line.ms), "f": _number(line.f), "p": _number(line.p)}
