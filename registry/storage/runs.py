"""The run order of a study: drawn once, then done or skipped run by run."""

from __future__ import annotations

from collections.abc import Sequence

from sqlalchemy import func, insert, select
from sqlalchemy.orm import Session

from registry.storage.tables import Run, Trial


def add_runs(session: Session, study_id: int, runs: Sequence[tuple[int, int | None]]) -> None:
    """Set down a run order as (cell, block rank), the first run first."""
    session.flush()  # Runs refer to cells.
    session.execute(
        insert(Run),
        [
            {
                "study_id": study_id, "position": position, "cell": cell, "block": block, "state": "waiting",
                "skip_reason": None, "whole_plot": None, "generators": None,
            }
            for position, (cell, block) in enumerate(runs, start=1)
        ],
    )  # fmt: skip


def runs_of(session: Session, study_id: int) -> list[Run]:
    """List the runs of a study in order."""
    return list(session.scalars(select(Run).where(Run.study_id == study_id).order_by(Run.position)))


def find_run(session: Session, study_id: int, position: int) -> Run | None:
    """Find one run by its place in the order."""
    return session.get(Run, (study_id, position))


def next_run(session: Session, study_id: int, *, block: int | None = None) -> Run | None:
    """Give the first run that waits, of one block where one is named."""
    query = select(Run).where(Run.study_id == study_id, Run.state == "waiting").order_by(Run.position).limit(1)
    return session.scalars(query if block is None else query.where(Run.block == block)).first()


def runs_by_state(session: Session, study_id: int) -> dict[str, int]:
    """Count the runs of a study by state; empty when no order was drawn."""
    rows = session.execute(select(Run.state, func.count()).where(Run.study_id == study_id).group_by(Run.state))
    return {row[0]: int(row[1]) for row in rows}


def trials_out_of_order(session: Session, study_ids: Sequence[int]) -> dict[int, int]:
    """Count the trials that count and belong to no run, by study; a study that has none is left out."""
    rows = session.execute(
        select(Trial.study_id, func.count())
        .where(Trial.study_id.in_(study_ids), Trial.kept, Trial.run_position.is_(None))
        .group_by(Trial.study_id)
    )
    return {row[0]: int(row[1]) for row in rows}
