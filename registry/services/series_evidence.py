"""What the closed studies of a series bring to a question across them, with everything's name."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import datetime
from typing import TYPE_CHECKING, Any, cast

from registry.errors import Fault, NotFound
from registry.services.lasting_names import LevelName, Names
from registry.services.tallied import policy_of, tallied_study
from registry.storage.frame import FrameFactor, FrameResponse, StudyFrame, fetch_frames
from registry.storage.levels import aliases_of
from registry.storage.runs import trials_out_of_order
from registry.storage.studies import factors_of_series, plans_of, studies_of
from registry.storage.tallies import fetch_tallies_of
from registry.synthesis.contributions import Contribution, FactorPart, PartRole, Standing
from registry.trials.units import conversion
from registry.trials.units import unit as find_unit

if TYPE_CHECKING:
    from registry.storage.tables import Plan, Study


@dataclass(frozen=True)
class StudyHead:
    """A closed study as pages across studies name it; ``standing`` says how it ended."""

    id: int
    title: str
    site: str
    started_at: datetime
    closed_at: datetime
    standing: Standing
    unit: str
    margin: str | None
    revision: int


@dataclass(frozen=True)
class SeriesEvidence:
    """The closed studies of a series in order of time, one response, in one unit."""

    response: FrameResponse
    unit: str
    margin: str | None
    heads: tuple[StudyHead, ...]
    contributions: tuple[Contribution, ...]
    names: Names
    measured: tuple[str, ...]
    waiting: int

    def head(self, study_id: int) -> StudyHead | None:
        """Find a study among them."""
        return next((head for head in self.heads if head.id == study_id), None)

    def contribution(self, study_id: int) -> Contribution:
        """Give what a study brings; it must be one of ``heads``."""
        return next(each for each in self.contributions if each.key == study_id)


def series_evidence(
    session: Any, series_id: int, *, response: str | None, told_by: int | None = None
) -> SeriesEvidence | None:
    """Gather the closed studies that read a response, in a number of queries that does not grow with them.

    Effects are told in the unit, and judged by the margin, of study ``told_by``, or of the
    latest study in the usual unit. Nothing is returned while no study has closed with a
    reading of any measured response. Raises NotFound for a response they do not have.
    """
    everything = studies_of(session, [series_id])
    studies = [study for study in everything if study.status == "closed"]
    frames = fetch_frames(session, [study.id for study in studies])
    measured = _measured(frames.values())
    if response is None and not measured:
        return None
    name = response if response is not None else measured[0]
    if name not in measured:
        raise NotFound(
            Fault("response", f"{name!r} is not measured in a closed study of this series", _choice(measured))
        )
    used = {study.id: found for study in studies if (found := frames[study.id].response(name)) is not None}
    tallies = fetch_tallies_of(session, list(used), next(iter(used.values())).response_id)
    having = [study for study in studies if any(tally.n for tally in tallies.get(study.id, {}).values())]
    if not having:
        return None
    teller = _teller([study.id for study in having], used, told_by)
    plans = plans_of(session, [study.id for study in having])
    stray = trials_out_of_order(session, [study.id for study in having])
    heads = tuple(_head(study, used[study.id], plans.get(study.id)) for study in having)
    contributions = tuple(
        replace(
            _contribution(
                study, frames[study.id], used[study.id], tallies[study.id], plans.get(study.id), unit=teller.unit
            ),
            in_order=study.id not in stray,
        )
        for study in having
    )
    waiting = sum(study.status == "running" for study in everything)
    names = _names(session, series_id)
    return SeriesEvidence(teller, teller.unit, teller.margin, heads, contributions, names, measured, waiting)


def _measured(frames: Any) -> tuple[str, ...]:
    return tuple(
        dict.fromkeys(response.name for frame in frames for response in frame.responses if response.kind == "measured")
    )


def _choice(measured: Sequence[str]) -> str:
    return f"choose {' or '.join(measured)}" if measured else "close a study that measures something first"


def _teller(order: Sequence[int], used: dict[int, FrameResponse], told_by: int | None) -> FrameResponse:
    """Pick the study whose unit and margin hold.

    The one asked for; else, of those in the unit most of them used, the latest that
    stated a margin, or simply the latest.
    """
    if told_by in used:
        return used[told_by]
    latest_first = [used[study_id] for study_id in reversed(order)]
    often = Counter(response.unit for response in latest_first).most_common(1)[0][0]
    usual = [response for response in latest_first if response.unit == often]
    with_margin = [response for response in (*usual, *latest_first) if response.margin]
    return (with_margin or usual)[0]


def _standing(study: Study, plan: Plan | None) -> Standing:
    if plan is None:
        return "exploratory"
    return {"size_reached": "full", "early": "early", "extended": "extended"}[study.close_reason or ""]  # type: ignore[return-value]


def _head(study: Study, response: FrameResponse, plan: Plan | None) -> StudyHead:
    return StudyHead(
        id=study.id,
        title=study.title,
        site=study.site,
        started_at=cast("datetime", study.started_at),  # A closed study has been started and closed.
        closed_at=cast("datetime", study.closed_at),
        standing=_standing(study, plan),
        unit=response.unit,
        margin=response.margin,
        revision=study.revision,
    )


def _contribution(
    study: Study, frame: StudyFrame, response: FrameResponse, tallies: dict[int, Any], plan: Plan | None, *, unit: str
) -> Contribution:
    return Contribution(
        key=study.id,
        title=study.title,
        tallied=tallied_study(frame, response, tallies),
        parts=tuple(_part(factor) for factor in frame.factors),
        error=policy_of(study.spread, blocked=frame.block is not None),
        scale=conversion(find_unit(response.unit), find_unit(unit)),
        standing=_standing(study, plan),
        per_cell=plan.per_cell if plan else None,
        tuning=float(plan.tau_squared) if plan and plan.tau_squared else None,
        alpha=float(plan.alpha) if plan else 0.05,
    )


def _part(factor: FrameFactor) -> FactorPart:
    role: PartRole = {"treatment": "treatment", "block": "block", "held": "held"}[factor.role]  # type: ignore[assignment]
    return FactorPart(factor.factor_id, role, factor.level_ids)


def _names(session: Any, series_id: int) -> Names:
    found = factors_of_series(session, series_id)
    levels = [level for _, of_factor in found for level in of_factor]
    aliases = aliases_of(session, [level.id for level in levels])
    return Names(
        {factor.id: factor.name for factor, _ in found},
        {level.id: LevelName(level.name, tuple(aliases[level.id]), level.replaces_id) for level in levels},
    )
