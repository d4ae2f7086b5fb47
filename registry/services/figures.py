"""Numbers as pages show them: a value, or a dash with its reason."""

from __future__ import annotations

from dataclasses import dataclass

from registry.analysis.results import Estimate
from registry.analysis.undefined import Number, Undefined


@dataclass(frozen=True)
class Figure:
    """A number, or why there is none."""

    value: float | None
    reason: str = ""


@dataclass(frozen=True)
class Interval:
    """A number with its standard error and interval, each with its reason where it is missing."""

    value: Figure
    se: Figure
    lower: Figure
    upper: Figure


def figure(number: Number) -> Figure:
    """Turn a number of the analysis into one for a page."""
    return Figure(None, number.reason) if isinstance(number, Undefined) else Figure(number)


def interval(estimate: Estimate) -> Interval:
    """Turn an estimate of the analysis into one for a page."""
    return Interval(figure(estimate.estimate), figure(estimate.se), figure(estimate.lower), figure(estimate.upper))
