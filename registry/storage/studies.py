"""Studies and their series, found, written and counted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import product
from typing import Any

from sqlalchemy import case, func, insert, select, update
from sqlalchemy.orm import Session

from registry.storage.tables import (
    Cell,
    CellLevel,
    Factor,
    Level,
    LevelAlias,
    Membership,
    Plan,
    Response,
    Series,
    Study,
    StudyFactor,
    StudyLevel,
    StudyResponse,
    TallyRow,
    Trial,
)


@dataclass(frozen=True)
class TrialCount:
    """How many trials a study has, how many of them set aside, and when the last one happened."""

    logged: int = 0
    set_aside: int = 0
    last: datetime | None = None


def find_series(session: Session, series_id: int) -> Series | None:
    """Find a series by its key."""
    return session.get(Series, series_id)


def series_named(session: Session, name: str) -> Series | None:
    """Find a series by its name."""
    return session.scalars(select(Series).where(Series.name == name)).first()


def new_series_row(session: Session, *, name: str, about: str, person_id: int, now: datetime) -> Series:
    """Add a series; the row has its key when this returns."""
    row = Series(name=name, about=about, created_at=now, created_by=person_id)
    session.add(row)
    session.flush()  # The key is needed by the first membership and by the event.
    return row


def series_open_to(session: Session, person_id: int, *, keeper: bool) -> list[tuple[Series, str]]:
    """List the series that somebody may see, by name, each with their role in it."""
    if keeper:
        return [(series, "keeper") for series in session.scalars(select(Series).order_by(Series.name))]
    rows = session.execute(
        select(Series, Membership.role)
        .join(Membership, Membership.series_id == Series.id)
        .where(Membership.person_id == person_id)
        .order_by(Series.name)
    )
    return [(row[0], row[1]) for row in rows]


def find_study(session: Session, study_id: int) -> Study | None:
    """Find a study by its key."""
    return session.get(Study, study_id)


def study_ids(session: Session) -> list[int]:
    """List the keys of all studies."""
    return list(session.scalars(select(Study.id).order_by(Study.id)))


def studies_of(session: Session, series_ids: Sequence[int]) -> list[Study]:
    """List the studies of some series in order of time; what is only planned comes last."""
    return list(
        session.scalars(
            select(Study)
            .where(Study.series_id.in_(series_ids))
            .order_by(Study.status == "planned", func.coalesce(Study.started_at, Study.created_at), Study.id)
        )
    )


def plans_of(session: Session, study_ids: Sequence[int]) -> dict[int, Plan]:
    """Give the locked plans of some studies, by study."""
    return {plan.study_id: plan for plan in session.scalars(select(Plan).where(Plan.study_id.in_(study_ids)))}


def trial_counts(session: Session, study_ids: Sequence[int]) -> dict[int, TrialCount]:
    """Count the trials of some studies in one query, by study."""
    rows = session.execute(
        select(
            Trial.study_id,
            func.count(),
            func.sum(case((Trial.kept, 0), else_=1)),
            func.max(func.coalesce(Trial.happened_at, Trial.logged_at), type_=Trial.logged_at.type),
        )
        .where(Trial.study_id.in_(study_ids))
        .group_by(Trial.study_id)
    )
    return {study_id: TrialCount(int(logged), int(aside), last) for study_id, logged, aside, last in rows}


def factors_of_series(session: Session, series_id: int) -> list[tuple[Factor, list[Level]]]:
    """List the factors that the studies of a series share, each with its levels."""
    factors = session.scalars(select(Factor).where(Factor.series_id == series_id).order_by(Factor.id)).all()
    levels = session.scalars(
        select(Level).join(Factor, Factor.id == Level.factor_id).where(Factor.series_id == series_id).order_by(Level.id)
    ).all()
    return [(factor, [level for level in levels if level.factor_id == factor.id]) for factor in factors]


def responses_of_series(session: Session, series_id: int) -> list[tuple[Response, StudyResponse | None]]:
    """List the responses of a series, each as its latest study recorded it."""
    responses = session.scalars(select(Response).where(Response.series_id == series_id).order_by(Response.id)).all()
    used = session.scalars(
        select(StudyResponse)
        .join(Response, Response.id == StudyResponse.response_id)
        .where(Response.series_id == series_id)
        .order_by(StudyResponse.study_id)
    ).all()
    latest = {row.response_id: row for row in used}
    return [(response, latest.get(response.id)) for response in responses]


def new_study_row(session: Session, fields: Mapping[str, Any]) -> Study:
    """Add a study, planned and empty; the row has its key when this returns."""
    row = Study(status="planned", close_reason=None, close_note=None, spread=None, revision=0, **fields)
    session.add(row)
    session.flush()  # The key is the first part of every key below.
    return row


def factor_named(session: Session, series_id: int, name: str) -> Factor:
    """Find a factor of a series by name, or add it."""
    found = session.scalars(select(Factor).where(Factor.series_id == series_id, Factor.name == name)).first()
    if found is None:
        found = Factor(series_id=series_id, name=name, about="")
        session.add(found)
        session.flush()  # Its levels need the key.
    return found


def level_named(session: Session, factor_id: int, name: str) -> Level:
    """Find a level of a factor by its name or an alias, or add it."""
    found = session.scalars(select(Level).where(Level.factor_id == factor_id, Level.name == name)).first()
    if found is None:
        found = session.scalars(
            select(Level)
            .join(LevelAlias, LevelAlias.level_id == Level.id)
            .where(Level.factor_id == factor_id, LevelAlias.name == name)
        ).first()
    if found is None:
        found = Level(factor_id=factor_id, name=name, definition="", running="", replaces_id=None)
        session.add(found)
        session.flush()  # The study's levels need the key.
    return found


def response_named(session: Session, series_id: int, name: str) -> Response | None:
    """Find a response of a series by name."""
    return session.scalars(select(Response).where(Response.series_id == series_id, Response.name == name)).first()


def new_response(session: Session, fields: Mapping[str, Any]) -> Response:
    """Add a response to a series; the row has its key when this returns."""
    row = Response(plausible_low=None, plausible_high=None, numerator_id=None, denominator_id=None, **fields)
    session.add(row)
    session.flush()  # The study's response needs the key.
    return row


def use_factor(
    session: Session, study_id: int, position: int, *, factor_id: int, role: str, level_ids: Sequence[int]
) -> None:
    """Say that a study uses a factor at these levels, in this order."""
    session.add(StudyFactor(study_id=study_id, position=position, factor_id=factor_id, role=role, set_anew=True))
    session.flush()  # The levels refer to the factor's place.
    session.add_all(
        StudyLevel(study_id=study_id, position=position, rank=rank, level_id=level_id)
        for rank, level_id in enumerate(level_ids)
    )


def use_response(session: Session, study_id: int, rank: int, *, response_id: int, fields: Mapping[str, Any]) -> None:
    """Say that a study records a response so."""
    session.add(
        StudyResponse(
            study_id=study_id,
            response_id=response_id,
            rank=rank,
            anchor=None,
            guard_margin=None,
            scale="raw",
            unit_value=None,
            **fields,
        )
    )


def cross_cells(session: Session, study_id: int, levels: Sequence[tuple[int, int, bool]]) -> int:
    """Make every cell of a study from (position, number of levels, is block); the block changes slowest.

    Returns how many cells there are.
    """
    session.flush()  # Cells refer to the levels.
    slowest_first = sorted(levels, key=lambda entry: not entry[2])
    ranks = list(product(*(range(count) for _, count, _ in slowest_first)))
    positions = [position for position, _, _ in slowest_first]
    cells = [{"study_id": study_id, "number": number, "weight": None} for number in range(1, len(ranks) + 1)]
    session.execute(insert(Cell), cells)
    session.execute(
        insert(CellLevel),
        [
            {"study_id": study_id, "cell": number, "position": position, "rank": rank}
            for number, of_cell in enumerate(ranks, start=1)
            for position, rank in zip(positions, of_cell, strict=True)
        ],
    )
    return len(ranks)


def set_anchor(session: Session, study_id: int, response_id: int, *, anchor: int) -> None:
    """Set the reading, in steps, that distances of a response are taken from."""
    _set_response(session, study_id, response_id, {"anchor": anchor})


def set_step(session: Session, study_id: int, response_id: int, *, step: str) -> None:
    """Set the step of a response; the caller rescales what was recorded."""
    _set_response(session, study_id, response_id, {"step": step})


def set_margin(session: Session, study_id: int, response_id: int, *, margin: str | None) -> None:
    """Set the margin that matters of a response."""
    _set_response(session, study_id, response_id, {"margin": margin})


def _set_response(session: Session, study_id: int, response_id: int, values: Mapping[str, Any]) -> None:
    session.execute(
        update(StudyResponse)
        .where(StudyResponse.study_id == study_id, StudyResponse.response_id == response_id)
        .values(**values)
    )


def add_plan(session: Session, plan: Mapping[str, Any]) -> None:
    """Set down a locked plan."""
    session.add(Plan(**plan))


def readings_per_response(session: Session, study_id: int) -> dict[int, int]:
    """Count the readings that the tallies hold, by response."""
    rows = session.execute(
        select(TallyRow.response_id, func.sum(TallyRow.n))
        .where(TallyRow.study_id == study_id)
        .group_by(TallyRow.response_id)
    )
    return {response_id: int(count) for response_id, count in rows}
