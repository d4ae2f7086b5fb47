"""Pooling a table of effects on file: weftbook.pooled/1."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from math import sqrt
from pathlib import Path
from typing import Any

from registry.analysis.undefined import Number, Undefined
from registry.exchange.effect_table import EffectRow, read_effects
from registry.services.across_words import number
from registry.synthesis.pooling import IntervalKind, LeftOut, Method, Pooled, leave_one_out, pool

FORMAT = "weftbook.pooled/1"
DASH = "\N{EN DASH}"


@dataclass(frozen=True)
class PoolWish:
    """What somebody wants of a table of effects."""

    path: Path
    method: Method
    interval: IntervalKind
    floor: bool
    confidence: float


@dataclass(frozen=True)
class PoolAnswer:
    """The pooled effect of a table, and what it would be without each study."""

    wish: PoolWish
    rows: tuple[EffectRow, ...]
    pooled: Pooled
    left_out: tuple[LeftOut, ...]

    def record(self) -> dict[str, Any]:
        """Write it as the record that people script against; what is undefined is null, its reason among the notes."""
        found = self.pooled
        return {
            "format": FORMAT,
            "studies": found.studies,
            "method": found.method,
            "interval": found.interval,
            "estimate": found.estimate,
            "se": number(found.se),
            "df": number(found.df),
            "lower": number(found.lower),
            "upper": number(found.upper),
            "p": number(found.p),
            "tau_squared": {
                "estimate": number(found.tau_squared.estimate),
                "lower": number(found.tau_squared.lower),
                "upper": number(found.tau_squared.upper),
            },
            "i_squared": number(found.i_squared),
            "q": {"value": number(found.q.value), "df": found.q.df, "p": number(found.q.p)},
            "prediction": _prediction(found),
            "each": [
                {"study": row.study, "effect": float(row.effect), "se": sqrt(row.variance), "weight": weight}
                for row, weight in zip(self.rows, found.weights, strict=True)
            ],
            "leave_one_out": [
                {
                    "without": self.rows[left.without].study,
                    "estimate": left.estimate,
                    "lower": number(left.lower),
                    "upper": number(left.upper),
                }
                for left in self.left_out
            ],
            "notes": list(self._notes()),
        }

    def _notes(self) -> Iterator[str]:
        yield from self.pooled.notes
        reasons = {
            "interval": self.pooled.lower,
            "spread between studies": self.pooled.tau_squared.estimate,
            "prediction": self.pooled.prediction.lower,
        }
        for name, value in reasons.items():
            if isinstance(value, Undefined):
                yield f"{name}: {value.reason}"

    def report(self) -> str:
        """Write it for people to read: the answer first, then each study."""
        return "\n".join(self._lines()) + "\n"

    def _lines(self) -> Iterator[str]:
        found = self.pooled
        studies = "1 study" if found.studies == 1 else f"{found.studies} studies"
        yield f"Together {studies} say {_spoken(found.estimate)}{_between(found.lower, found.upper)}."
        if not isinstance(found.tau_squared.estimate, Undefined):
            spread = sqrt(found.tau_squared.estimate)
            yield f"True effects differ between studies with a standard deviation of {_spoken(spread)}."
        if not isinstance(found.prediction.lower, Undefined):
            between = _between(found.prediction.lower, found.prediction.upper).strip(" ()")
            yield f"One more study like these may truly lie from {between}."
        yield ""
        width = max(len(row.study) for row in self.rows)
        yield f"{'Study':<{width}}  {'effect':>10}  {'std. error':>10}  {'weight':>7}"
        for row, weight in zip(self.rows, found.weights, strict=True):
            effect, error = _spoken(float(row.effect)), _spoken(sqrt(row.variance))
            yield f"{row.study:<{width}}  {effect:>10}  {error:>10}  {100 * weight:>6.1f}%"
        yield from (f"Note: {note}" for note in self._notes())


def pool_file(wish: PoolWish) -> PoolAnswer:
    """Read a table of effects and pool it."""
    rows = read_effects(wish.path)
    effects, variances = [float(row.effect) for row in rows], [float(row.variance) for row in rows]
    found = pool(
        effects, variances, method=wish.method, interval=wish.interval, floor=wish.floor, confidence=wish.confidence
    )
    left_out = (
        leave_one_out(
            effects, variances, method=wish.method, interval=wish.interval, floor=wish.floor,
            confidence=wish.confidence,
        )
        if len(rows) > 1
        else ()
    )  # fmt: skip
    return PoolAnswer(wish, rows, found, left_out)


def _prediction(found: Pooled) -> dict[str, Any] | None:
    prediction = found.prediction
    if isinstance(prediction.lower, Undefined):
        return None
    return {"df": number(prediction.df), "lower": prediction.lower, "upper": number(prediction.upper)}


def _spoken(value: float) -> str:
    return f"{value:.4g}".replace("-", "\N{MINUS SIGN}")


def _between(lower: Number, upper: Number) -> str:
    if isinstance(lower, Undefined) or isinstance(upper, Undefined):
        return ""
    return f" ({_spoken(lower)} to {_spoken(upper)})"
