"""One study beside an earlier one: what changed, on common ground, and what cannot be compared."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import timedelta
from typing import Any

from registry.analysis.undefined import Undefined
from registry.errors import Fault, NotFound, NotNow
from registry.services.access import Role, require_study
from registry.services.across_words import apart_words, caveat_words, contrast_name, renamed_words
from registry.services.comparison_record import comparison_record
from registry.services.figures import Figure, Interval, figure, interval
from registry.services.lasting_names import Names
from registry.services.people import Person
from registry.services.series_evidence import SeriesEvidence, StudyHead, series_evidence
from registry.storage.engine import Database
from registry.storage.studies import find_series
from registry.synthesis.changes import WORDS, Change, Compared, compare
from registry.trials.units import unit as find_unit

YEAR = timedelta(days=365)
SEASON = timedelta(days=46)
MOST_SAID = 4


@dataclass(frozen=True)
class ChangeLine:
    """One contrast in both studies and what changed; ``words`` is the finding, or why there is none."""

    name: str
    first: Interval
    second: Interval
    change: Interval
    p: Figure
    code: str | None
    words: str
    caveats: tuple[str, ...]


@dataclass(frozen=True)
class Comparison:
    """Two closed studies of a series on common ground, sentences first."""

    series_id: int
    series_name: str
    role: Role
    first: StudyHead
    second: StudyHead
    response: str
    measured: tuple[str, ...]
    unit: str
    unit_name: str
    margin: str | None
    places: int
    sentences: tuple[str, ...]
    differences: tuple[ChangeLine, ...]
    interactions: tuple[ChangeLine, ...]
    apart: tuple[str, ...]
    caveats: tuple[str, ...]
    renamed: tuple[str, ...]
    others: tuple[StudyHead, ...]
    before: StudyHead | None
    season: StudyHead | None
    record: dict[str, Any]


def compare_studies(
    database: Database,
    person: Person,
    study_id: int,
    *,
    beside: int | None = None,
    response: str | None = None,
) -> Comparison:
    """Set a closed study beside another of its series: the one before it when none is named.

    Effects are told in the unit, and judged by the margin, of the later of the two. Raises
    NotNow for a study that is not closed or has none to be set beside, NotFound for a
    study of another series.
    """
    with database.read() as session:
        study, role = require_study(session, person, study_id, at_least="viewer")
        if study.status != "closed":
            raise NotNow(
                Fault(study.title, f"it is {study.status}", "only closed studies are compared; close it first")
            )
        return comparison_of(session, study.series_id, study_id, role=role, beside=beside, response=response)


def comparison_of(
    session: Any, series_id: int, study_id: int, *, role: Role, beside: int | None, response: str | None
) -> Comparison:
    """Compare inside an open read, for whoever was let in."""
    evidence = series_evidence(session, series_id, response=response, told_by=study_id)
    this = evidence.head(study_id) if evidence else None
    if evidence is None or this is None:
        raise NotNow(Fault("study", "it has no reading of this response", "choose a response that it read"))
    before, season = _study_before(evidence.heads, this), _same_season(evidence.heads, this)
    other = _other(evidence, this, beside if beside is not None else before.id if before else None)
    if other.started_at > this.started_at:
        evidence = series_evidence(session, series_id, response=evidence.response.name, told_by=other.id) or evidence
    series = find_series(session, series_id)
    first, second = sorted((this, other), key=lambda head: (head.started_at, head.id))
    return _comparison(evidence, first, second, (before, season), series_id, series.name if series else "", role)


def _comparison(
    evidence: SeriesEvidence,
    first: StudyHead,
    second: StudyHead,
    offered: tuple[StudyHead | None, StudyHead | None],
    series_id: int,
    series_name: str,
    role: Role,
) -> Comparison:
    names, unit = evidence.names, evidence.unit
    margin = float(evidence.margin) if evidence.margin else None
    found = compare(evidence.contribution(first.id), evidence.contribution(second.id), margin=margin)
    titles = {head.id: head.title for head in (first, second)}
    places = _places(evidence)
    apart = tuple(apart_words(each, names, first=first.title, second=second.title) for each in found.apart)
    caveats = tuple(dict.fromkeys(text for change in _all(found) for text in _caveats(change, names, titles)))
    levels = [level for of_factor in found.common.values() for level in of_factor]
    renamed = tuple(renamed_words(levels, names))
    sentences = tuple(_sentences(found, names, unit=unit, places=places, margin=evidence.margin))
    return Comparison(
        series_id=series_id,
        series_name=series_name,
        role=role,
        first=first,
        second=second,
        response=evidence.response.name,
        measured=evidence.measured,
        unit=unit,
        unit_name=find_unit(unit).name,
        margin=evidence.margin,
        places=places,
        sentences=sentences,
        differences=tuple(_line(change, names, titles) for change in found.differences),
        interactions=tuple(_line(change, names, titles) for change in found.interactions),
        apart=apart,
        caveats=caveats,
        renamed=renamed,
        others=evidence.heads,
        before=offered[0],
        season=offered[1],
        record=comparison_record(
            found, names, heads=(first, second), response=evidence.response.name, unit=unit, margin=evidence.margin,
            sentences=sentences, not_comparable=apart, caveats=(*caveats, *renamed),
        ),
    )  # fmt: skip


def _all(found: Compared) -> tuple[Change, ...]:
    return (*found.differences, *found.interactions)


def _caveats(change: Change, names: Names, titles: dict[Any, str]) -> Iterator[str]:
    for caveat in change.caveats:
        yield caveat_words(caveat, names, titles)


def _places(evidence: SeriesEvidence) -> int:
    """Show one digit more than the step of the study whose unit is told."""
    _, _, digits = str(evidence.response.step).partition(".")
    return min(len(digits) + 1, 12)


def _study_before(heads: Sequence[StudyHead], this: StudyHead) -> StudyHead | None:
    """Find the study before this one: at the same site if there is one, else at any."""
    earlier = [head for head in heads if (head.started_at, head.id) < (this.started_at, this.id)]
    same_site = [head for head in earlier if head.site == this.site]
    nearest = same_site or earlier
    return nearest[-1] if nearest else None


def _same_season(heads: Sequence[StudyHead], this: StudyHead) -> StudyHead | None:
    """Find the study of this site that started nearest to a year before, within half a season."""
    a_year_ago = this.started_at - YEAR
    near = [
        head
        for head in heads
        if head.id != this.id and head.site == this.site and abs(head.started_at - a_year_ago) <= SEASON
    ]
    return min(near, key=lambda head: abs(head.started_at - a_year_ago), default=None)


def _other(evidence: SeriesEvidence, this: StudyHead, beside: int | None) -> StudyHead:
    others = [head for head in evidence.heads if head.id != this.id]
    if beside is None and others:
        beside = others[0].id  # Nothing came before, so the first that came after.
    found = next((head for head in others if head.id == beside), None)
    if found is None and not others:
        raise NotNow(
            Fault(this.title, "no other closed study of its series read this response", "compare once there are two")
        )
    if found is None:
        raise NotFound(
            Fault(
                "study to compare with",
                f"there is no closed study {beside} in this series that read {evidence.response.name}",
                "choose one from the list",
                "with",
            )
        )
    return found


def _line(change: Change, names: Names, titles: dict[Any, str]) -> ChangeLine:
    code = change.code
    return ChangeLine(
        name=contrast_name(change.corners, names),
        first=interval(change.first),
        second=interval(change.second),
        change=interval(change.change),
        p=figure(change.p),
        code=None if isinstance(code, Undefined) else code,
        words=code.reason if isinstance(code, Undefined) else WORDS[code],
        caveats=tuple(_caveats(change, names, titles)),
    )


def _sentences(found: Compared, names: Names, *, unit: str, places: int, margin: str | None) -> Iterator[str]:
    changes = _all(found)
    if not changes:
        yield "The two studies have no contrast in common; below is why."
        return
    changed = [change for change in changes if change.code == "changed"]
    if not changed:
        yield "No contrast is shown to have changed."
    for change in sorted(changed, key=lambda each: -abs(_value(each.change.estimate)))[:MOST_SAID]:
        yield _changed(change, names, unit=unit, places=places)
    if len(changed) > MOST_SAID:
        yield f"{len(changed) - MOST_SAID} more changed; they stand in the table."
    for code, one, several in (
        ("same", "1 contrast shows no change that matters", "{} contrasts show no change that matters"),
        ("unsettled", "1 contrast is not settled", "{} contrasts are not settled"),
    ):
        count = sum(change.code == code for change in changes)
        if count:
            yield (one if count == 1 else several.format(count)) + "."
    unjudged = sum(isinstance(change.code, Undefined) for change in changes)
    if unjudged:
        yield f"{unjudged} of {len(changes)} contrasts cannot be judged; the table says why."
    if margin is None:
        yield "No margin that matters was stated, so only directions are judged."


def _changed(change: Change, names: Names, *, unit: str, places: int) -> str:
    was, now, by = (_value(each.estimate) for each in (change.first, change.second, change.change))
    lower, upper = _value(change.change.lower), _value(change.change.upper)

    def spoken(value: float) -> str:
        return f"{value:.{places}f}".replace("-", "\N{MINUS SIGN}")

    return (
        f"{contrast_name(change.corners, names)}: {spoken(was)} {unit} then, {spoken(now)} {unit} now; changed by"
        f" {spoken(by)} {unit} ({spoken(lower)} to {spoken(upper)})."
    )


def _value(number: float | Undefined) -> float:
    return 0.0 if isinstance(number, Undefined) else number
