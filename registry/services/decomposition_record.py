"""A decomposition as the record that people script against: weftbook.decomposition/1."""

from __future__ import annotations

from typing import Any

from registry.analysis.results import (
    Decomposition,
    Estimate,
    SumOfSquares,
    TermResult,
)
from registry.analysis.undefined import Number, Undefined

FORMAT = "weftbook.decomposition/1"


def as_record(result: Decomposition, *, response: str, step: str, notes: tuple[str, ...] = ()) -> dict[str, Any]:
    """Write a decomposition as plain values; what is undefined is null, its reason among the notes."""
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
        "terms": [_term(term) for term in result.terms],
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
                "tukey_kramer": {
                    "p": _number(pair.tukey_kramer.p),
                    "lower": _number(pair.tukey_kramer.lower),
                    "upper": _number(pair.tukey_kramer.upper),
                },
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
        "notes": [*result.notes, *notes],
    }


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


def _term(term: TermResult) -> dict[str, Any]:
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
    record["offsets"] = [{"levels": dict(offset.levels), **_estimate(offset.value)} for offset in term.offsets]
    return record


def _line(line: SumOfSquares) -> dict[str, Any]:
    return {"ss": _number(line.ss), "ms": _number(line.ms), "f": _number(line.f), "p": _number(line.p)}
