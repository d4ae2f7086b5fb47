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
    """One factor of a study; ``known_as`` gives the rank of every name, aliases included.

    ``factor_id`` and ``level_ids`` are the lasting identities that other studies share.
    """

    position: int
    name: str
    role: str
    levels: tuple[str, ...]
    known_as: Mapping[str, int]
    factor_id: int
    level_ids: tuple[int, ...]


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
    return fetch_frames(session, [study_id])[study_id]


def fetch_frames(session: Session, study_ids: Sequence[int]) -> dict[int, StudyFrame]:
    """Read the frames of several studies in the same handful of queries, however many they are."""
    factors = _factors(session, study_ids)
    responses = _responses(session, study_ids)
    cells = _cells(session, study_ids)
    return {key: StudyFrame(key, tuple(factors[key]), tuple(responses[key]), cells[key]) for key in study_ids}


def _factors(session: Session, study_ids: Sequence[int]) -> dict[int, list[FrameFactor]]:
    levels: dict[tuple[int, int], list[tuple[int, str]]] = defaultdict(list)
    known_as: dict[tuple[int, int], dict[str, int]] = defaultdict(dict)
    rows = session.execute(
        select(StudyLevel.study_id, StudyLevel.position, StudyLevel.rank, Level.id, Level.name)
        .join(Level, Level.id == StudyLevel.level_id)
        .where(StudyLevel.study_id.in_(study_ids))
        .order_by(StudyLevel.study_id, StudyLevel.position, StudyLevel.rank)
    )
    for study_id, position, rank, level_id, name in rows:
        levels[study_id, position].append((level_id, name))
        known_as[study_id, position][name] = rank
    aliases = session.execute(
        select(StudyLevel.study_id, StudyLevel.position, StudyLevel.rank, LevelAlias.name)
        .join(LevelAlias, LevelAlias.level_id == StudyLevel.level_id)
        .where(StudyLevel.study_id.in_(study_ids))
    )
    for study_id, position, rank, name in aliases:
        known_as[study_id, position].setdefault(name, rank)
    found: dict[int, list[FrameFactor]] = defaultdict(list)
    factors = session.execute(
        select(StudyFactor.study_id, StudyFactor.position, StudyFactor.role, Factor.id, Factor.name)
        .join(Factor, Factor.id == StudyFactor.factor_id)
        .where(StudyFactor.study_id.in_(study_ids))
        .order_by(StudyFactor.study_id, StudyFactor.position)
    )
    for study_id, position, role, factor_id, name in factors:
        of_factor = levels[study_id, position]
        found[study_id].append(
            FrameFactor(
                position,
                name,
                role,
                tuple(level for _, level in of_factor),
                known_as[study_id, position],
                factor_id,
                tuple(level_id for level_id, _ in of_factor),
            )
        )
    return found


def _responses(session: Session, study_ids: Sequence[int]) -> dict[int, list[FrameResponse]]:
    found: dict[int, list[FrameResponse]] = defaultdict(list)
    rows = session.execute(
        select(StudyResponse, Response)
        .join(Response, Response.id == StudyResponse.response_id)
        .where(StudyResponse.study_id.in_(study_ids))
        .order_by(StudyResponse.study_id, StudyResponse.rank)
    )
    for used, response in rows:
        found[used.study_id].append(
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
        )
    return found


def _cells(session: Session, study_ids: Sequence[int]) -> dict[int, dict[tuple[int, ...], int]]:
    ranks: dict[tuple[int, int], list[int]] = defaultdict(list)
    rows = session.execute(
        select(CellLevel.study_id, CellLevel.cell, CellLevel.rank)
        .where(CellLevel.study_id.in_(study_ids))
        .order_by(CellLevel.study_id, CellLevel.cell, CellLevel.position)
    )
    for study_id, cell, rank in rows:
        ranks[study_id, cell].append(rank)
    found: dict[int, dict[tuple[int, ...], int]] = defaultdict(dict)
    for (study_id, cell), of_cell in ranks.items():
        found[study_id][tuple(of_cell)] = cell
    return found
