"""A comparison of two studies as a record: weftbook.comparison/1."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from registry.analysis.results import Estimate
from registry.analysis.undefined import Undefined
from registry.services.across_words import contrast_name, number
from registry.services.lasting_names import Names
from registry.services.series_evidence import StudyHead
from registry.synthesis.changes import WORDS, Change, Compared

FORMAT = "weftbook.comparison/1"


def comparison_record(
    found: Compared,
    names: Names,
    *,
    heads: tuple[StudyHead, StudyHead],
    response: str,
    unit: str,
    margin: str | None,
    sentences: Sequence[str],
    not_comparable: Sequence[str],
    caveats: Sequence[str],
) -> dict[str, Any]:
    """Write a comparison as plain values; what is undefined is null."""
    return {
        "format": FORMAT,
        "response": response,
        "unit": unit,
        "margin": margin,
        "studies": [head_record(head) for head in heads],
        "sentences": list(sentences),
        "differences": [_change(change, names) for change in found.differences],
        "interactions": [_change(change, names) for change in found.interactions],
        "not_comparable": list(not_comparable),
        "caveats": list(caveats),
    }


def head_record(head: StudyHead) -> dict[str, Any]:
    """Write the head of a study; times in UTC."""
    return {
        "id": head.id,
        "title": head.title,
        "site": head.site,
        "started_at": head.started_at.isoformat(),
        "closed_at": head.closed_at.isoformat(),
        "ended": head.standing,
        "unit": head.unit,
    }


def _change(change: Change, names: Names) -> dict[str, Any]:
    code = change.code
    return {
        "name": contrast_name(change.corners, names),
        "factors": [names.factor(factor) for factor in change.corners],
        "levels": [[names.level(level) for level in pair] for pair in change.corners.values()],
        "first": _estimate(change.first),
        "second": _estimate(change.second),
        "change": _estimate(change.change) | {"p": number(change.p)},
        "code": None if isinstance(code, Undefined) else code,
        "words": code.reason if isinstance(code, Undefined) else WORDS[code],
    }


def _estimate(estimate: Estimate) -> dict[str, Any]:
    return {
        "estimate": number(estimate.estimate),
        "se": number(estimate.se),
        "df": number(estimate.df),
        "lower": number(estimate.lower),
        "upper": number(estimate.upper),
    }
