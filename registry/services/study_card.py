"""The head of a study: what every page about it shows first."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

from registry.services.access import Role, covers, require_study
from registry.services.people import Person
from registry.storage.engine import Database
from registry.storage.frame import FrameFactor, StudyFrame, fetch_frame
from registry.storage.studies import TrialCount, find_series, plans_of, readings_per_response, trial_counts
from registry.storage.tables import Plan, Study
from registry.trials.units import unit as find_unit


@dataclass(frozen=True)
class FactorLine:
    """A factor of the study, with its levels in order."""

    name: str
    role: str
    levels: tuple[str, ...]


@dataclass(frozen=True)
class ResponseLine:
    """A response of the study; ``readings`` counts those in the tallies."""

    name: str
    about: str
    unit: str
    unit_name: str
    step: str
    margin: str | None
    wanted: str
    kind: str
    part: str
    readings: int


@dataclass(frozen=True)
class PlanLine:
    """The locked plan, in short."""

    per_cell: int
    planned: int
    spread: str
    looks: str
    alpha: str
    locked_at: datetime


@dataclass(frozen=True)
class StudyCard:
    """What a study is, where it stands, and what the person may do with it."""

    id: int
    title: str
    question: str
    series_id: int
    series_name: str
    site: str
    time_zone: str
    status: str
    close_reason: str | None
    close_note: str | None
    spread: str | None
    created_at: datetime
    started_at: datetime | None
    closed_at: datetime | None
    factors: tuple[FactorLine, ...]
    block: FactorLine | None
    held: tuple[FactorLine, ...]
    responses: tuple[ResponseLine, ...]
    plan: PlanLine | None
    role: Role
    revision: int
    logged: int
    set_aside: int
    last_trial: datetime | None
    cells: int

    def may(self, role: Role) -> bool:
        """Whether the person's role covers this one."""
        return covers(self.role, role)

    @property
    def kept(self) -> int:
        """How many trials count."""
        return self.logged - self.set_aside

    @property
    def term_name(self) -> str:
        """The study's factors, crossed: walk × batch."""
        return " × ".join(factor.name for factor in self.factors)


def study_card(database: Database, person: Person, study_id: int) -> StudyCard:
    """Show the head of a study."""
    with database.read() as session:
        return open_study_card(session, person, study_id)


def open_study_card(session: Any, person: Person, study_id: int) -> StudyCard:
    """Make the head of a study inside an open read, for whom may read it."""
    study, role = require_study(session, person, study_id, at_least="viewer")
    return card_of(session, study, role)


def card_of(session: Any, study: Study, role: Role) -> StudyCard:
    """Make the head of a study that the caller may show."""
    study_id = study.id
    series = find_series(session, study.series_id)
    frame = fetch_frame(session, study_id)
    count = trial_counts(session, [study_id]).get(study_id, TrialCount())
    plan = plans_of(session, [study_id]).get(study_id)
    return StudyCard(
        id=study.id,
        title=study.title,
        question=study.question,
        series_id=study.series_id,
        series_name=series.name if series else "",
        site=study.site,
        time_zone=study.time_zone,
        status=study.status,
        close_reason=study.close_reason,
        close_note=study.close_note,
        spread=study.spread,
        created_at=study.created_at,
        started_at=study.started_at,
        closed_at=study.closed_at,
        factors=tuple(_factor_line(factor) for factor in frame.treatments),
        block=_factor_line(frame.block) if frame.block else None,
        held=tuple(_factor_line(factor) for factor in frame.factors if factor.role == "held"),
        responses=_response_lines(frame, readings_per_response(session, study_id)),
        plan=_plan_line(plan, study.spread) if plan else None,
        role=role,
        revision=study.revision,
        logged=count.logged,
        set_aside=count.set_aside,
        last_trial=count.last,
        cells=len(frame.cells),
    )


def _factor_line(factor: FrameFactor) -> FactorLine:
    return FactorLine(factor.name, factor.role, factor.levels)


def _response_lines(frame: StudyFrame, readings: dict[int, int]) -> tuple[ResponseLine, ...]:
    return tuple(
        ResponseLine(
            name=response.name,
            about=response.about,
            unit=response.unit,
            unit_name="yes or no" if response.kind == "yes_no" else find_unit(response.unit).name,
            step=str(response.step),
            margin=response.margin,
            wanted=response.wanted,
            kind=response.kind,
            part=response.part,
            readings=readings.get(response.response_id, 0),
        )
        for response in frame.responses
    )


def _plan_line(plan: Plan, spread: str | None) -> PlanLine:
    return PlanLine(plan.per_cell, plan.planned, spread or "shared", plan.looks, plan.alpha, plan.locked_at)
