"""Tables of trials, their readings, and the exact tallies kept in step with them."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import BigInteger, CheckConstraint, ForeignKey, ForeignKeyConstraint, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Big, Hash, Long


class Trial(Base):
    """One logged trial; numbered within its study."""

    __tablename__ = "trial"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "cell"], ["cell.study_id", "cell.number"]),
        ForeignKeyConstraint(["study_id", "actual_cell"], ["cell.study_id", "cell.number"]),
        ForeignKeyConstraint(["study_id", "run_position"], ["run.study_id", "run.position"]),
        UniqueConstraint("study_id", "client_key"),
    )

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    cell: Mapped[int] = mapped_column(comment="as assigned; tallies count this one")
    actual_cell: Mapped[int | None] = mapped_column(comment="only where it differs")
    run_position: Mapped[int | None]
    happened_at: Mapped[datetime | None]
    phone_clock: Mapped[datetime | None]
    logged_at: Mapped[datetime]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    client_key: Mapped[Hash | None] = mapped_column(comment="a UUID; rows of an import have none")
    content_hash: Mapped[Hash | None] = mapped_column(comment="of the entry as first sent under its key")
    kept: Mapped[bool]


class Reading(Base):
    """One response of one trial, as a whole number of steps."""

    __tablename__ = "reading"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "trial"], ["trial.study_id", "trial.number"]),
        ForeignKeyConstraint(["study_id", "response_id"], ["study_response.study_id", "study_response.response_id"]),
    )

    study_id: Mapped[int] = mapped_column(primary_key=True)
    trial: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    response_id: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    steps: Mapped[Big]
    kept: Mapped[bool]


class TrialNote(Base):
    """Which free text was noted at a trial; the text itself stands where it can be erased."""

    __tablename__ = "trial_note"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "trial"], ["trial.study_id", "trial.number"]),
        ForeignKeyConstraint(["study_id", "text_number"], ["free_text.study_id", "free_text.number"]),
    )

    study_id: Mapped[int] = mapped_column(primary_key=True)
    trial: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    text_number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)


class TrialCondition(Base):
    """What a condition was at one trial."""

    __tablename__ = "trial_condition"
    __table_args__ = (ForeignKeyConstraint(["study_id", "trial"], ["trial.study_id", "trial.number"]),)

    study_id: Mapped[int] = mapped_column(primary_key=True)
    trial: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    condition_id: Mapped[int] = mapped_column(ForeignKey("condition.id"), primary_key=True)
    value: Mapped[Long]


class TallyRow(Base):
    """Count, sum and sum of squares of one response in one cell, as exact integers.

    Sums are over d = reading - anchor of the readings that are kept. The squares are
    two limbs in base 2**40; the checks hold them canonical, so that two equal tallies
    are equal row by row. SQLite would turn an overflowing sum into a float silently:
    the checks on typeof refuse that.
    """

    __tablename__ = "tally"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "response_id"], ["study_response.study_id", "study_response.response_id"]),
        ForeignKeyConstraint(["study_id", "cell"], ["cell.study_id", "cell.number"]),
        CheckConstraint("n >= 0 AND n < 134217728", name="n"),
        CheckConstraint("squares_low >= 0 AND squares_low < 1099511627776", name="squares_low"),
        CheckConstraint("squares_high >= 0", name="squares_high"),
        CheckConstraint("n > 0 OR (total = 0 AND squares_high = 0 AND squares_low = 0)", name="empty_is_zero"),
        CheckConstraint(
            "typeof(n) = 'integer' AND typeof(total) = 'integer'"
            " AND typeof(squares_high) = 'integer' AND typeof(squares_low) = 'integer'",
            name="integers",
        ).ddl_if(dialect="sqlite"),
    )

    study_id: Mapped[int] = mapped_column(primary_key=True)
    response_id: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    cell: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    n: Mapped[Big]
    total: Mapped[Big]
    squares_high: Mapped[Big]
    squares_low: Mapped[Big]
