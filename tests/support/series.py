"""Contributions of studies made from readings, for questions across studies."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from fractions import Fraction
from random import Random

from registry.analysis.results import ErrorPolicy
from registry.synthesis.contributions import Contribution, FactorPart, Standing
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.tallies import EMPTY, TalliedStudy, Tally

Trial = tuple[dict[str, str], int]


def readings_of(
    crossed: Mapping[str, Sequence[str]], *, seed: int, per_cell: int = 6, held: Mapping[str, str] | None = None
) -> list[Trial]:
    """Draw readings in steps for every combination; each level and each pair of levels has an effect of its own."""
    rng = Random(seed)
    cells: list[dict[str, str]] = [dict(held or {})]
    for factor, levels in crossed.items():
        cells = [{**cell, factor: level} for cell in cells for level in levels]
    trials = []
    for cell in cells:
        for _ in range(per_cell + rng.randrange(3)):
            effect = sum(_weight(level) for level in cell.values())
            pairs = sum(_weight(one + other) for one in cell.values() for other in cell.values() if one < other)
            trials.append((cell, round(200 + effect + pairs + rng.gauss(0, 8))))
    return trials


def _weight(text: str) -> float:
    return Random(text).uniform(-20, 20)


def contribution(
    key: str,
    trials: Sequence[Trial],
    crossed: Mapping[str, Sequence[str]],
    *,
    held: Mapping[str, str] | None = None,
    blocks: Sequence[str] = (),
    step: Fraction = Fraction(1, 10),
    scale: Fraction = Fraction(1),
    error: ErrorPolicy = "pooled",
    standing: Standing = "full",
    per_cell: int | None = None,
    tuning: float | None = None,
) -> Contribution:
    """Tally trials as a study of its own; a level is known by its factor and name everywhere."""
    tallies: dict[tuple[int, ...], Tally] = defaultdict(lambda: EMPTY)
    for levels, steps in trials:
        cell = tuple(list(names).index(levels[factor]) for factor, names in crossed.items())
        if blocks:
            cell = (list(blocks).index(levels["shift"]), *cell)
        tallies[cell] = tallies[cell].add(steps - 200)
    layout = Layout(
        tuple(Factor(name, tuple(levels)) for name, levels in crossed.items()),
        Factor("shift", tuple(blocks)) if blocks else None,
    )
    parts = [FactorPart(name, "treatment", identities(name, levels)) for name, levels in crossed.items()]
    if blocks:
        parts.append(FactorPart("shift", "block", identities("shift", blocks)))
    parts += [FactorPart(name, "held", identities(name, [level])) for name, level in (held or {}).items()]
    return Contribution(
        key, key, TalliedStudy(layout, step, 200, dict(tallies)), tuple(parts), error, scale, standing, per_cell, tuning
    )


def identities(factor: str, levels: Sequence[str]) -> tuple[tuple[str, str], ...]:
    """Give the lasting identities of some levels of a factor."""
    return tuple((factor, level) for level in levels)


def mean_of(trials: Sequence[Trial], **levels: str) -> float:
    """Average the readings at some levels, straight from the trials, in steps."""
    some = [steps for at, steps in trials if all(at[factor] == level for factor, level in levels.items())]
    return sum(some) / len(some)
