"""A recurrence board as the record that people script against: weftbook.recurrence/1."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from registry.analysis.undefined import Undefined
from registry.services.across_words import number, omitted_words, silent_notes, verdict_sentence, verdict_words
from registry.services.lasting_names import Names
from registry.synthesis.recurrence import Board, Recurrence, Shown

FORMAT = "weftbook.recurrence/1"


def board_record(board: Board, names: Names, *, notes: Sequence[str] = ()) -> dict[str, Any]:
    """Write a board as plain values; what is undefined is null, its reason among the notes."""
    return {
        "format": FORMAT,
        "count_confidence": 0.95,
        "combiner": "fisher",
        "interactions": [recurrence_record(each, names) for each in board.recurrences],
        "notes": [*notes, *silent_notes(board, names), *(omitted_words(omitted, names) for omitted in board.omitted)],
    }


def recurrence_record(recurrence: Recurrence, names: Names) -> dict[str, Any]:
    """Write one contrast over its studies."""
    pooled = recurrence.pooled
    return {
        "factors": [names.factor(factor) for factor in recurrence.corners],
        "levels": [[names.level(level) for level in pair] for pair in recurrence.corners.values()],
        "verdict": recurrence.verdict,
        "words": verdict_words(recurrence),
        "at_least": {
            "up": recurrence.counts.up,
            "down": recurrence.counts.down,
            "nil": recurrence.counts.nil,
        },
        "r_value": number(recurrence.r_value),
        "r_value_one": number(recurrence.r_value_one),
        "each": [_shown(shown) for shown in recurrence.each],
        "pooled": None
        if isinstance(pooled, Undefined)
        else {
            "studies": pooled.studies,
            "estimate": pooled.estimate,
            "lower": number(pooled.lower),
            "upper": number(pooled.upper),
            "tau_squared": number(pooled.tau_squared.estimate),
            "prediction": {"lower": number(pooled.prediction.lower), "upper": number(pooled.prediction.upper)},
        },
        "tags": [],
        "sentence": verdict_sentence(recurrence),
    }


def _shown(shown: Shown) -> dict[str, Any]:
    estimate = shown.evidence.estimate
    return {
        "study": shown.title,
        "estimate": number(estimate.estimate),
        "se": number(estimate.se),
        "df": number(estimate.df),
        "lower": number(estimate.lower),
        "upper": number(estimate.upper),
        "p_up": shown.evidence.p_up,
        "p_down": shown.evidence.p_down,
        "p_small": shown.evidence.p_small,
        "judged": shown.evidence.counts,
    }
