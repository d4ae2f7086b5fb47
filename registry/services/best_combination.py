"""Which combination to run: those that may be the best, and what each gives up at worst."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from registry.analysis.best import Contender, compare_with_best
from registry.analysis.results import CellSummary, Decomposition
from registry.analysis.undefined import Undefined
from registry.services.amounts import amount, unit_words
from registry.services.study_card import ResponseLine

MOST_COMPARED = 128


@dataclass(frozen=True)
class ContenderLine:
    """A combination that may be the best: its mean, and what choosing it gives up at worst, in response units."""

    levels: tuple[str, ...]
    n: int
    mean: float
    given_up: float


@dataclass(frozen=True)
class BestCombination:
    """The combinations that may be the best, the best seen first; ``why_not`` says why none is named."""

    sentences: tuple[str, ...]
    contenders: tuple[ContenderLine, ...]
    compared: int
    approximate: bool
    why_not: str


def best_combination(response: ResponseLine, result: Decomposition) -> BestCombination:
    """Say which combination is best in a response, as far as the study can tell."""
    why_not = _why_not(response, result)
    filled = [cell for cell in result.cells if cell.n]
    if why_not:
        return BestCombination((), (), len(filled), approximate=False, why_not=why_not)
    sign = -1.0 if response.wanted == "lower" else 1.0
    own = result.error == "per-cell"
    means = [sign * _known(cell.mean) for cell in filled]
    found = compare_with_best(
        means,
        [_variance(cell, result) for cell in filled],
        df=[float(cell.n - 1) if own else float(result.residual.df) for cell in filled],
        confidence=result.confidence,
    )
    ranked = sorted(zip(filled, found, strict=True), key=lambda each: -each[1].mean)
    lines = tuple(
        ContenderLine(tuple(cell.levels.values()), cell.n, _known(cell.mean), 0.0 - each.lower)
        for cell, each in ranked
        if each.may_be_best
    )
    return BestCombination(
        tuple(_sentences(lines, ranked[0][1], response, compared=len(filled))),
        lines,
        len(filled),
        approximate=own,
        why_not="",
    )


def _why_not(response: ResponseLine, result: Decomposition) -> str:
    filled = [cell for cell in result.cells if cell.n]
    if response.kind != "measured" or response.wanted not in ("lower", "higher"):
        return "It was not said which way this response is wanted."
    if result.layout.block is not None:
        return "With blocks the best combination is not named yet; the differences below allow for them."
    if not 2 <= len(filled) <= MOST_COMPARED:
        return f"Between 2 and {MOST_COMPARED} combinations can be compared with the best; here are {len(filled)}."
    if isinstance(result.residual.ms, Undefined) or result.residual.ms <= 0:
        return "The readings show no spread to judge by."
    if result.error == "per-cell" and any(cell.n < 2 or not _known(cell.sd) > 0 for cell in filled):
        return "Some combinations show no spread of their own to judge by."
    return ""


def _known(value: float | Undefined) -> float:
    return 0.0 if isinstance(value, Undefined) else value


def _variance(cell: CellSummary, result: Decomposition) -> float:
    square = _known(cell.sd) ** 2 if result.error == "per-cell" else _known(result.residual.ms)
    return square / cell.n


def _sentences(
    lines: tuple[ContenderLine, ...], seen_best: Contender, response: ResponseLine, *, compared: int
) -> Iterator[str]:
    best, *others = lines
    name, unit = ", ".join(best.levels), unit_words(response)
    if not others:
        ahead = amount(seen_best.upper, response)
        yield f"The best of {compared} combinations is {name}; the next one is behind it by at most {ahead} {unit}."
        return
    given_up = amount(best.given_up, response)
    rivals = "1 other" if len(others) == 1 else f"{len(others)} others"
    yield (
        f"The best seen of {compared} combinations is {name}; {rivals} cannot be ruled out, and choosing it gives up at"
        f" most {given_up} {unit}."
    )
