"""A recurrence board written for people to read in a terminal."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from decimal import Decimal

from registry.analysis.undefined import Undefined
from registry.services.across_words import (
    contrast_name,
    omitted_words,
    silent_notes,
    verdict_sentence,
    verdict_words,
)
from registry.services.lasting_names import Names
from registry.synthesis.recurrence import Board, Recurrence, Shown

DASH = "\N{EN DASH}"


def as_report(board: Board, names: Names, *, response: str, margin: Decimal, notes: Sequence[str]) -> str:
    """Write every contrast with its verdict, its sentence, and each study's part in it."""
    return "\n".join(_lines(board, names, response=response, margin=margin, notes=notes)) + "\n"


def _lines(board: Board, names: Names, *, response: str, margin: Decimal, notes: Sequence[str]) -> Iterator[str]:
    yield f"Interactions in {response} across studies; margin that matters {margin:f}"
    if not board.recurrences:
        crossed = any(omitted.crossed for omitted in board.omitted)
        yield (
            "No study can estimate an interaction; the notes say why."
            if crossed
            else "No study crosses two of these factors, so there is nothing to see again."
        )
    for recurrence in board.recurrences:
        yield ""
        yield from _contrast(recurrence, names)
    told = [*notes, *silent_notes(board, names), *(omitted_words(omitted, names) for omitted in board.omitted)]
    if told:
        yield ""
        yield from (f"Note: {note}" for note in told)


def _contrast(recurrence: Recurrence, names: Names) -> Iterator[str]:
    yield contrast_name(recurrence.corners, names)
    yield f"  {verdict_words(recurrence)}: {verdict_sentence(recurrence)}"
    width = max(len(shown.title) for shown in recurrence.each)
    width = max(width, len("all together"))
    for shown in recurrence.each:
        yield f"    {shown.title:<{width}}  {_range(shown)}"
    pooled = recurrence.pooled
    if not isinstance(pooled, Undefined):
        yield f"    {'all together':<{width}}  {_spoken(pooled.estimate, pooled.lower, pooled.upper)}"


def _range(shown: Shown) -> str:
    estimate = shown.evidence.estimate
    return _spoken(estimate.estimate, estimate.lower, estimate.upper)


def _spoken(value: float | Undefined, lower: float | Undefined, upper: float | Undefined) -> str:
    if isinstance(value, Undefined):
        return f"{DASH} ({value.reason})"
    if isinstance(lower, Undefined) or isinstance(upper, Undefined):
        reason = lower if isinstance(lower, Undefined) else upper
        return f"{value:.4g} (no interval: {reason.reason if isinstance(reason, Undefined) else ''})"
    return f"{value:.4g} ({lower:.4g} to {upper:.4g})".replace("-", "\N{MINUS SIGN}")
