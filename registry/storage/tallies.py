"""Tallies kept in step with the readings, by exact integer updates."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from sqlalchemy import BigInteger, ColumnClause, Table, and_, bindparam, func, literal_column, select, update
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.orm import Session

from registry.errors import Fault, InputRefused
from registry.storage.frame import fetch_frame
from registry.storage.tables import Reading, Study, TallyRow, Trial
from registry.trials.tallies import EMPTY, LIMB, LIMB_BITS, MAX_CELL_TRIALS, Tally, from_limbs, to_limbs

# The shift is written as a literal: as a bound parameter PostgreSQL would take it for a
# bigint, and it has no bigint >> bigint.
_SHIFT: ColumnClause[int] = literal_column(str(LIMB_BITS))
_MASK: ColumnClause[int] = literal_column(str(LIMB - 1))


@dataclass(frozen=True, order=True)
class TallyKey:
    """Which tally of a study: response and cell."""

    response_id: int
    cell: int


def fetch_tallies(session: Session, study_id: int, response_id: int) -> dict[int, Tally]:
    """Give the tally of every cell that has had a reading of the response, by cell number."""
    return fetch_tallies_of(session, [study_id], response_id)[study_id]


def fetch_tallies_of(session: Session, study_ids: Sequence[int], response_id: int) -> dict[int, dict[int, Tally]]:
    """Give the tallies of one response in several studies, in one query: by study, then by cell number."""
    rows = session.execute(
        select(
            TallyRow.study_id, TallyRow.cell, TallyRow.n, TallyRow.total, TallyRow.squares_high, TallyRow.squares_low
        )
        .where(TallyRow.study_id.in_(study_ids), TallyRow.response_id == response_id)
        .order_by(TallyRow.study_id, TallyRow.cell)
    )
    found: dict[int, dict[int, Tally]] = {study_id: {} for study_id in study_ids}
    for row in rows:
        found[row.study_id][row.cell] = Tally(row.n, row.total, from_limbs(row.squares_high, row.squares_low))
    return found


def change_tallies(session: Session, study_id: int, changes: Mapping[TallyKey, Tally]) -> None:
    """Add signed tallies to the stored ones; the caller holds the study's row locked.

    A change may be negative in every part (a trial set aside). The limbs stay canonical
    because Python's shift and mask round down for negative numbers, and the carry of the
    low limb is taken in the same UPDATE that adds to the high one.
    """
    changes = {key: change for key, change in changes.items() if change != EMPTY}
    if not changes:
        return
    _make_rows(session, study_id, changes)
    _refuse_full_cells(session, study_id, changes)
    table = _table()
    low = bindparam("low", type_=BigInteger)
    statement = (
        update(table)
        .where(
            table.c.study_id == bindparam("study"),
            table.c.response_id == bindparam("response"),
            table.c.cell == bindparam("cell_number"),
        )
        .values(
            n=table.c.n + bindparam("count", type_=BigInteger),
            total=table.c.total + bindparam("sum", type_=BigInteger),
            squares_high=table.c.squares_high
            + bindparam("high", type_=BigInteger)
            + (table.c.squares_low + low).op(">>")(_SHIFT),
            squares_low=(table.c.squares_low + low).op("&")(_MASK),
        )
    )
    parameters = []
    for key, change in sorted(changes.items()):
        high_part, low_part = to_limbs(change.squares)
        parameters.append(
            {"study": study_id, "response": key.response_id, "cell_number": key.cell, "count": change.n,
             "sum": change.total, "high": high_part, "low": low_part}
        )  # fmt: skip
    session.connection().execute(statement, parameters)


def _table() -> Table:
    table = TallyRow.__table__
    if not isinstance(table, Table):
        raise TypeError("the tally's model stands on one table")
    return table


def _make_rows(session: Session, study_id: int, changes: Mapping[TallyKey, Tally]) -> None:
    """See that a row stands for every tally that will change, so that the change is an UPDATE on both databases."""
    insert = postgresql.insert if session.get_bind().dialect.name == "postgresql" else sqlite.insert
    statement = insert(_table()).on_conflict_do_nothing()
    session.connection().execute(
        statement,
        [
            {"study_id": study_id, "response_id": key.response_id, "cell": key.cell, "n": 0, "total": 0,
             "squares_high": 0, "squares_low": 0}
            for key in sorted(changes)
        ],
    )  # fmt: skip


def _refuse_full_cells(session: Session, study_id: int, changes: Mapping[TallyKey, Tally]) -> None:
    most = session.scalar(select(func.max(TallyRow.n)).where(TallyRow.study_id == study_id)) or 0
    if most + max(change.n for change in changes.values()) >= MAX_CELL_TRIALS:
        raise InputRefused(
            Fault("study", f"a combination already holds {most} readings",
                  f"a combination can hold {MAX_CELL_TRIALS - 1}; start a new study")
        )  # fmt: skip


def recounted(session: Session, study_id: int, response_id: int, *, anchor: int) -> dict[int, Tally]:
    """Count the tallies afresh from the readings that are kept, in Python integers."""
    rows = session.execute(
        select(Trial.cell, Reading.steps, func.count())
        .join(Trial, and_(Trial.study_id == Reading.study_id, Trial.number == Reading.trial))
        .where(Reading.study_id == study_id, Reading.response_id == response_id, Reading.kept, Trial.kept)
        .group_by(Trial.cell, Reading.steps)
        .execution_options(yield_per=10_000)
    )
    tallies: dict[int, Tally] = {}
    for cell, steps, times in rows:
        distance = int(steps) - anchor
        part = Tally(int(times), distance * int(times), distance * distance * int(times))
        tallies[cell] = tallies.get(cell, EMPTY).merge(part)
    return tallies


def wrong_tallies(session: Session, study_id: int) -> list[str]:
    """Name every tally of a study that does not equal a recount from the readings."""
    faults: list[str] = []
    title = session.scalars(select(Study.title).where(Study.id == study_id)).one()
    frame = fetch_frame(session, study_id)
    for response in frame.responses:
        kept = fetch_tallies(session, study_id, response.response_id)
        true = recounted(session, study_id, response.response_id, anchor=response.anchor or 0)
        for cell in sorted(kept.keys() | true.keys()):
            if kept.get(cell, EMPTY) != true.get(cell, EMPTY):
                levels = ", ".join(f"{factor} {level}" for factor, level in frame.levels_of(cell).items())
                faults.append(
                    f"study {study_id} ({title}), {response.name}, {levels}: the tally says"
                    f" {_words(kept.get(cell, EMPTY))}, a recount of the readings says {_words(true.get(cell, EMPTY))}"
                )
    return faults


def _words(tally: Tally) -> str:
    return f"n {tally.n}, sum {tally.total}, sum of squares {tally.squares}"


def rescale_response(session: Session, study_id: int, response_id: int, *, factor: int) -> None:
    """Multiply every reading, the anchor and the tallies of a response by a whole number: a finer step."""
    session.execute(
        update(Reading)
        .where(Reading.study_id == study_id, Reading.response_id == response_id)
        .values(steps=Reading.steps * factor)
        .execution_options(synchronize_session=False)
    )
    for cell, tally in fetch_tallies(session, study_id, response_id).items():
        finer = tally.rescaled(factor)
        high, low = to_limbs(finer.squares)
        session.execute(
            update(TallyRow)
            .where(TallyRow.study_id == study_id, TallyRow.response_id == response_id, TallyRow.cell == cell)
            .values(total=finer.total, squares_high=high, squares_low=low)
            .execution_options(synchronize_session=False)
        )


def span_of_readings(session: Session, study_id: int, response_id: int) -> tuple[int, int] | None:
    """Give the least and the greatest reading in steps, those set aside included; None before the first."""
    least, greatest = session.execute(
        select(func.min(Reading.steps), func.max(Reading.steps)).where(
            Reading.study_id == study_id, Reading.response_id == response_id
        )
    ).one()
    return None if least is None else (int(least), int(greatest))
