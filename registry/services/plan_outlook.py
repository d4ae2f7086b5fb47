"""What a plan can lean on: earlier studies of the same factors, and how sure so many trials would be."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations
from math import prod, sqrt
from typing import Any

from registry.analysis.distributions import t_quantile
from registry.analysis.undefined import Undefined
from registry.planning.precision import trials_for_precision, upper_bound_of_spread
from registry.services.people import Person
from registry.services.series_evidence import SeriesEvidence, series_evidence
from registry.services.study_card import StudyCard, open_study_card
from registry.storage.engine import Database
from registry.storage.frame import fetch_frames
from registry.storage.pinned import latest_headlines
from registry.storage.studies import studies_of
from registry.trials.units import conversion
from registry.trials.units import unit as find_unit

TRIALS = (2, 3, 5, 8, 12, 20, 30, 50)
CHANCE = 0.8


@dataclass(frozen=True)
class EarlierStudy:
    """A study of the series that used some of the same factors, and what it found in one sentence."""

    id: int
    title: str
    site: str
    status: str
    shared: tuple[str, ...]
    headline: str | None


@dataclass(frozen=True)
class PrecisionLine:
    """With so many trials a combination: how many in all, and how far each kind of interval would reach."""

    trials: int
    total: int
    half_widths: tuple[float, ...]


@dataclass(frozen=True)
class Precision:
    """How far intervals would reach, by trials a combination.

    ``contrasts`` name the columns, ``wanted`` the trials at which each reaches no further
    than the margin. ``sd`` is the spread planned with: the bound that the true one stays
    below with chance 0.8, from the study named.
    """

    response: str
    unit: str
    margin: str
    sd: float
    sd_from: str
    contrasts: tuple[str, ...]
    lines: tuple[PrecisionLine, ...]
    wanted: tuple[int, ...]


@dataclass(frozen=True)
class PlanOutlook:
    """What is known before the first trial; ``why_no_precision`` says why nothing is said of sizes."""

    earlier: tuple[EarlierStudy, ...]
    precision: Precision | None
    why_no_precision: str


def plan_outlook(database: Database, person: Person, study_id: int) -> PlanOutlook:
    """Say what has been tried before with these factors, and how many trials how much certainty takes."""
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        earlier = tuple(_earlier(session, card))
        measured = next((line for line in card.responses if line.kind == "measured" and line.margin), None)
        if measured is None:
            return PlanOutlook(earlier, None, "No measured response states a margin that matters.")
        evidence = _evidence(session, card, measured.name)
    if evidence is None:
        why = f"No closed study of this series has read {measured.name}, so its spread is not known yet."
        return PlanOutlook(earlier, None, why)
    found = _precision(card, measured.name, measured.unit, measured.margin or "", evidence)
    return PlanOutlook(earlier, found, "" if found else "No closed study shows a spread to plan with.")


def _earlier(session: Any, card: StudyCard) -> Iterator[EarlierStudy]:
    """List the other studies of the series that share a factor, the newest first."""
    others = [study for study in studies_of(session, [card.series_id]) if study.id != card.id]
    frames = fetch_frames(session, [study.id for study in others])
    headlines = latest_headlines(session, [study.id for study in others])
    own = {factor.name: set(factor.levels) for factor in card.factors}
    for study in reversed(others):
        crossed = {factor.name: factor.levels for factor in frames[study.id].treatments}
        shared = tuple(name for name, levels in own.items() if len(levels & set(crossed.get(name, ()))) > 1)
        if shared and study.status in ("closed", "running"):
            yield EarlierStudy(study.id, study.title, study.site, study.status, shared, headlines.get(study.id))


def _evidence(session: Any, card: StudyCard, response: str) -> SeriesEvidence | None:
    measured = series_evidence(session, card.series_id, response=None)
    if measured is None or response not in measured.measured:
        return None
    return series_evidence(session, card.series_id, response=response)


def _precision(card: StudyCard, response: str, unit: str, margin: str, evidence: SeriesEvidence) -> Precision | None:
    """Work with the latest closed study of the same site that shows a spread, or of any site."""
    same_site = [head for head in evidence.heads if head.site == card.site]
    for head in [*reversed(same_site), *reversed(evidence.heads)]:
        study = evidence.contribution(head.id)
        spread = study.estimator.spread
        if isinstance(spread.ms, Undefined) or spread.ms <= 0:
            continue
        scale = float(conversion(find_unit(head.unit), find_unit(unit)))
        sd = upper_bound_of_spread(sqrt(spread.ms), spread.df, chance=CHANCE) * scale
        squares = dict(_squares(card))
        lines = tuple(_line(card, trials, squares, sd=sd) for trials in TRIALS)
        combined = card.cells
        wanted = tuple(
            trials_for_precision(float(margin), sd=sd, squares=each, combinations=combined) for each in squares.values()
        )
        return Precision(response, unit, margin, sd, head.title, tuple(squares), lines, wanted)
    return None


def _squares(card: StudyCard) -> Iterator[tuple[str, float]]:
    """Give the sum of squared coefficients of a difference in each factor, and of an interaction of each pair.

    Every corner averages equally over the cells that share its levels, so each of its
    cells counts 1 over their number.
    """
    sizes: Mapping[str, int] = {factor.name: len(factor.levels) for factor in card.factors}
    blocks = len(card.block.levels) if card.block else 1
    cells = prod(sizes.values()) * blocks
    for name, size in sizes.items():
        yield name, 2 / (cells / size)
    for one, other in combinations(sizes, 2):
        yield f"{one} \N{MULTIPLICATION SIGN} {other}", 4 / (cells / (sizes[one] * sizes[other]))


def _line(card: StudyCard, trials: int, squares: Mapping[str, float], *, sd: float) -> PrecisionLine:
    quantile = t_quantile(0.975, float(card.cells * (trials - 1)))
    half_widths = tuple(quantile * sd * sqrt(each / trials) for each in squares.values())
    return PrecisionLine(trials, trials * card.cells, half_widths)
