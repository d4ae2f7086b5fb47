"""A study's frame: the factors, levels, cells and responses that a trial must fit."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

from sqlalchemy import select
from sqlalchemy.orm import Session

from registry.storage.tables import (
    CellLevel,
    Factor,
    Level,
    LevelAlias,
    Response,
    StudyFactor,
    StudyLevel,
    StudyResponse,
)
from registry.trials.readings import Step


@dataclass(frozen=True)
class FrameFactor:
    """One factor of a study; ``known_as`` gives the rank of every name, aliases included."""

    position: int
    name: str
    role: str
    levels: tuple[str, ...]
    known_as: Mapping[str, int]


@dataclass(frozen=True)
class FrameResponse:
    """One response of a study, as readings of it are checked and kept."""

    response_id: int
    name: str
    about: str
    kind: str
    part: str
    wanted: str
    unit: str
    step: Step
    anchor: int | None
    margin: str | None


@dataclass(frozen=True)
class StudyFrame:
    """What a study crosses and what it reads off each trial."""

    study_id: int
    factors: tuple[FrameFactor, ...]
    responses: tuple[FrameResponse, ...]
    cells: Mapping[tuple[int, ...], int]

    @cached_property
    def treatments(self) -> tuple[FrameFactor, ...]:
        """The crossed factors, in order."""
        return tuple(factor for factor in self.factors if factor.role == "treatment")

    @cached_property
    def block(self) -> FrameFactor | None:
        """The block factor, when the study has one."""
        return next((factor for factor in self.factors if factor.role == "block"), None)

    @cached_property
    def chosen(self) -> tuple[FrameFactor, ...]:
        """The factors whose level a trial states, in the order in which a cell lists its ranks."""
        return tuple(factor for factor in self.factors if factor.role != "held")

    @cached_property
    def ranks(self) -> dict[int, tuple[int, ...]]:
        """The ranks of each cell, by cell number, in the order of ``chosen``."""
        return {number: ranks for ranks, number in self.cells.items()}

    def levels_of(self, cell: int) -> dict[str, str]:
        """Name the level that a cell has of every chosen factor."""
        ranks = self.ranks[cell]
        return {factor.name: factor.levels[rank] for factor, rank in zip(self.chosen, ranks, strict=True)}

    def response(self, name: str) -> FrameResponse | None:
        """Find a response by its name."""
        return next((response for response in self.responses if response.name == name), None)

    def response_by_id(self, response_id: int) -> FrameResponse:
        """Find a response by its key, which must be one of this study's."""
        return next(response for response in self.responses if response.response_id == response_id)


def fetch_frame(session: Session, study_id: int) -> StudyFrame:
    """Read a study's frame in a handful of queries, whatever its size."""
    return StudyFrame(study_id, _factors(session, study_id), _responses(session, study_id), _cells(session, study_id))


def _factors(session: Session, study_id: int) -> tuple[FrameFactor, ...]:
    levels: dict[int, list[str]] = defaultdict(list)
    known_as: dict[int, dict[str, int]] = defaultdict(dict)
    rows = session.execute(
        select(StudyLevel.position, StudyLevel.rank, Level.name)
        .join(Level, Level.id == StudyLevel.level_id)
        .where(StudyLevel.study_id == study_id)
        .order_by(StudyLevel.position, StudyLevel.rank)
    )
    for position, rank, name in rows:
        levels[position].append(name)
        known_as[position][name] = rank
    aliases = session.execute(
        select(StudyLevel.position, StudyLevel.rank, LevelAlias.name)
        .join(LevelAlias, LevelAlias.level_id == StudyLevel.level_id)
        .where(StudyLevel.study_id == study_id)
    )
    for position, rank, name in aliases:
        known_as[position].setdefault(name, rank)
    factors = session.execute(
        select(StudyFactor.position, StudyFactor.role, Factor.name)
        .join(Factor, Factor.id == StudyFactor.factor_id)
        .where(StudyFactor.study_id == study_id)
        .order_by(StudyFactor.position)
    )
    return tuple(
        FrameFactor(row.position, row.name, row.role, tuple(levels[row.position]), known_as[row.position])
        for row in factors
    )


def _responses(session: Session, study_id: int) -> tuple[FrameResponse, ...]:
    rows: Sequence[tuple[StudyResponse, Response]] = [
        (row[0], row[1])
        for row in session.execute(
            select(StudyResponse, Response)
            .join(Response, Response.id == StudyResponse.response_id)
            .where(StudyResponse.study_id == study_id)
            .order_by(StudyResponse.rank)
        )
    ]
    return tuple(
        FrameResponse(
            response_id=used.response_id,
            name=response.name,
            about=response.about,
            kind=response.kind,
            part=response.part,
            wanted=response.wanted,
            unit=used.unit,
            step=Step.parse(used.step),
            anchor=used.anchor,
            margin=used.margin,
        )
        for used, response in rows
    )


def _cells(session: Session, study_id: int) -> dict[tuple[int, ...], int]:
    ranks: dict[int, list[int]] = defaultdict(list)
    rows = session.execute(
        select(CellLevel.cell, CellLevel.rank)
        .where(CellLevel.study_id == study_id)
        .order_by(CellLevel.cell, CellLevel.position)
    )
    for cell, rank in rows:
        ranks[cell].append(rank)
    return {tuple(of_cell): cell for cell, of_cell in ranks.items()}
