"""Which interactions of a series are seen again, study after study."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime
from math import sqrt
from typing import Any

from registry.analysis.undefined import Undefined
from registry.errors import InputRefused
from registry.planning.precision import trials_for_precision, upper_bound_of_spread
from registry.services.access import Role, require_series
from registry.services.across_words import (
    NEXT,
    caveat_words,
    contrast_name,
    omitted_words,
    renamed_words,
    silent_words,
    verdict_sentence,
    verdict_words,
)
from registry.services.comparison_record import head_record
from registry.services.figures import Figure, Interval, figure, interval
from registry.services.people import Person
from registry.services.recurrence_record import board_record
from registry.services.series_evidence import SeriesEvidence, StudyHead, series_evidence
from registry.storage.engine import Database
from registry.synthesis.common_ground import ground_beside
from registry.synthesis.contributions import Contribution, coefficients
from registry.synthesis.recurrence import Board, Recurrence, VerdictCode, board
from registry.trials.units import unit as find_unit

FDR = 0.05
# What somebody wants to see first: what is there, then what is open, then what is settled as nothing.
ORDER: tuple[VerdictCode, ...] = ("seen_again", "opposite", "once", "unsettled", "small", "single")


@dataclass(frozen=True)
class StudyMark:
    """One study's part in a line of the board; ``place`` is its number in the list of studies."""

    place: int
    study: str
    value: Interval
    judged: bool
    why_not: str


@dataclass(frozen=True)
class RecurrenceLine:
    """One interaction over the studies: verdict and sentence first, then what is behind them."""

    name: str
    code: VerdictCode
    words: str
    sentence: str
    next_step: str
    up: int
    down: int
    nil: int
    r_value: Figure
    r_value_one: Figure
    marks: tuple[StudyMark, ...]
    pooled: Interval | None
    prediction: Interval | None
    between: Figure
    caveats: tuple[str, ...]


@dataclass(frozen=True)
class RecurrenceBoard:
    """Every interaction of a series; ``why_empty`` says why there is no line, when there is none."""

    series_id: int
    series_name: str
    role: Role
    response: str
    measured: tuple[str, ...]
    unit: str
    unit_name: str
    margin: str | None
    places: int
    as_of: datetime | None
    studies: tuple[StudyHead, ...]
    waiting: int
    sentences: tuple[str, ...]
    lines: tuple[RecurrenceLine, ...]
    omitted: tuple[str, ...]
    renamed: tuple[str, ...]
    why_empty: str
    record: dict[str, Any]


def recurrence_board(
    database: Database, person: Person, series_id: int, *, response: str | None = None
) -> RecurrenceBoard:
    """Judge every 2 × 2 interaction contrast of a series over its closed studies."""
    with database.read() as session:
        series, role = require_series(session, person, series_id, at_least="viewer")
        evidence = series_evidence(session, series_id, response=response)
        name = series.name
    if evidence is None:
        return _empty(series_id, name, role, "No study of this series has closed yet.", evidence=None)
    if evidence.margin is None:
        why = f"No closed study stated a margin that matters for {evidence.response.name}, and a verdict needs one."
        return _empty(series_id, name, role, why, evidence=evidence)
    found = board(evidence.contributions, margin=float(evidence.margin), fdr=FDR)
    return _filled(series_id, name, role, evidence, found)


def _empty(series_id: int, name: str, role: Role, why: str, *, evidence: SeriesEvidence | None) -> RecurrenceBoard:
    return RecurrenceBoard(
        series_id=series_id,
        series_name=name,
        role=role,
        response=evidence.response.name if evidence else "",
        measured=evidence.measured if evidence else (),
        unit=evidence.unit if evidence else "",
        unit_name=find_unit(evidence.unit).name if evidence else "",
        margin=None,
        places=2,
        as_of=None,
        studies=evidence.heads if evidence else (),
        waiting=evidence.waiting if evidence else 0,
        sentences=(),
        lines=(),
        omitted=(),
        renamed=(),
        why_empty=why,
        record={"format": "weftbook.recurrence/1", "interactions": [], "notes": [why]},
    )


def _filled(series_id: int, name: str, role: Role, evidence: SeriesEvidence, found: Board) -> RecurrenceBoard:
    names = evidence.names
    places = {head.id: place for place, head in enumerate(evidence.heads, start=1)}
    recurrences = sorted(found.recurrences, key=lambda each: ORDER.index(each.verdict))
    _, _, digits = str(evidence.response.step).partition(".")
    levels = [level for each in recurrences for pair in each.corners.values() for level in pair]
    as_of = max(head.closed_at for head in evidence.heads)
    record = board_record(found, names) | {
        "response": evidence.response.name,
        "unit": evidence.unit,
        "margin": evidence.margin,
        "fdr": FDR,
        "as_of": as_of.isoformat(),
        "studies": [head_record(head) for head in evidence.heads],
    }
    return RecurrenceBoard(
        series_id=series_id,
        series_name=name,
        role=role,
        response=evidence.response.name,
        measured=evidence.measured,
        unit=evidence.unit,
        unit_name=find_unit(evidence.unit).name,
        margin=evidence.margin,
        places=min(len(digits) + 1, 12),
        as_of=as_of,
        studies=evidence.heads,
        waiting=evidence.waiting,
        sentences=tuple(_sentences(recurrences, evidence)),
        lines=tuple(_line(each, evidence, places) for each in recurrences),
        omitted=tuple(f"{omitted_words(omitted, names)}." for omitted in found.omitted),
        renamed=tuple(renamed_words(levels, names)),
        why_empty="" if recurrences else "No closed study crosses two factors.",
        record=record,
    )


def _sentences(recurrences: list[Recurrence], evidence: SeriesEvidence) -> Iterator[str]:
    counts = {code: sum(each.verdict == code for each in recurrences) for code in ORDER}
    told = {
        "seen_again": "seen again", "opposite": "opposite in some studies", "once": "seen once so far",
        "unsettled": "not settled", "small": "too small to matter", "single": "in one study only",
    }  # fmt: skip
    parts = [f"{count} {told[code]}" for code, count in counts.items() if count]
    number = len(recurrences)
    if parts:
        yield f"Of {number} interaction contrasts over {len(evidence.heads)} closed studies: {', '.join(parts)}."
    for each in recurrences:
        if each.verdict in ("seen_again", "opposite", "once"):
            yield f"{contrast_name(each.corners, evidence.names)}: {verdict_words(each)}. {verdict_sentence(each)}"


def _line(recurrence: Recurrence, evidence: SeriesEvidence, places: dict[int, int]) -> RecurrenceLine:
    names, pooled = evidence.names, recurrence.pooled
    titles = {head.id: head.title for head in evidence.heads}
    known = None if isinstance(pooled, Undefined) else pooled
    return RecurrenceLine(
        name=contrast_name(recurrence.corners, names),
        code=recurrence.verdict,
        words=verdict_words(recurrence),
        sentence=verdict_sentence(recurrence) + _what_would_settle(recurrence, evidence),
        next_step=NEXT[recurrence.verdict],
        up=recurrence.counts.up,
        down=recurrence.counts.down,
        nil=recurrence.counts.nil,
        r_value=figure(recurrence.r_value),
        r_value_one=figure(recurrence.r_value_one),
        marks=tuple(_marks(recurrence, places)),
        pooled=_pooled(known.estimate, known.se, known.lower, known.upper) if known else None,
        prediction=_pooled(known.estimate, known.se, known.prediction.lower, known.prediction.upper) if known else None,
        between=figure(pooled) if isinstance(pooled, Undefined) else _spread_between(pooled.tau_squared.estimate),
        caveats=(
            *(caveat_words(caveat, names, titles) for caveat in recurrence.caveats),
            *([f"{silent_words(recurrence)}."] if recurrence.silent else []),
        ),
    )


def _marks(recurrence: Recurrence, places: dict[int, int]) -> Iterator[StudyMark]:
    for shown in recurrence.each:
        estimate = shown.evidence.estimate
        why_not = estimate.lower.reason if isinstance(estimate.lower, Undefined) else ""
        key = shown.study
        place = places[key] if isinstance(key, int) else 0
        yield StudyMark(place, shown.title, interval(estimate), shown.evidence.counts, why_not)


def _pooled(value: float, se: float | Undefined, lower: float | Undefined, upper: float | Undefined) -> Interval:
    return Interval(Figure(value), figure(se), figure(lower), figure(upper))


def _spread_between(tau_squared: float | Undefined) -> Figure:
    return figure(tau_squared if isinstance(tau_squared, Undefined) else sqrt(tau_squared))


def _what_would_settle(recurrence: Recurrence, evidence: SeriesEvidence) -> str:
    """Say how large one more study would have to be for its own interval to reach no further than half the margin."""
    if recurrence.verdict != "unsettled" or evidence.margin is None:
        return ""
    half = float(evidence.margin) / 2
    crossing = [evidence.contribution(shown.study) for shown in recurrence.each if isinstance(shown.study, int)]
    try:
        trials = _trials_wanted(crossing[-1], recurrence, half)
    except InputRefused:
        return " No study of a size that can be run would settle it at the present spread."
    return (
        f" One more study like the last of them, with about {trials} trials a combination, would bring its own"
        f" interval within {half:g} {evidence.unit} either way."
    )


def _trials_wanted(study: Contribution, recurrence: Recurrence, half: float) -> int:
    ground = ground_beside([study], list(recurrence.corners))
    row, denominator = coefficients(study, recurrence.corners, ground.over[study.key])
    spread = study.estimator.spread
    mean_square = spread.ms if not isinstance(spread.ms, Undefined) else 0.0
    sd = upper_bound_of_spread(sqrt(mean_square) * float(study.scale), spread.df) if spread.df else 0.0
    squares = float(((row[0].astype(float) / denominator) ** 2).sum())
    return trials_for_precision(half, sd=sd, squares=squares, combinations=len(study.estimator.exact.cells))
