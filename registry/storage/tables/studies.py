"""Tables of a study: its plan, factors, responses, cells and run order."""

from __future__ import annotations

from datetime import datetime
from typing import Any

from sqlalchemy import CheckConstraint, ForeignKey, ForeignKeyConstraint, Index, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Big, Code, Decimals, Id, Long, Name, one_of


class Study(Base):
    """One crossed study; its revision rises with every write, so that a page can tell what it shows."""

    __tablename__ = "study"
    __table_args__ = (
        CheckConstraint(one_of("status", "planned", "running", "closed", "withdrawn"), name="status"),
        CheckConstraint(one_of("close_reason", "size_reached", "early", "extended"), name="close_reason"),
        CheckConstraint("(status = 'closed') = (close_reason IS NOT NULL)", name="closed_with_reason"),
        CheckConstraint(one_of("spread", "shared", "own"), name="spread"),
        CheckConstraint("revision >= 0", name="revision"),
        Index("ix_study_series_id", "series_id"),
    )

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"))
    title: Mapped[Name]
    question: Mapped[Long]
    site: Mapped[Name]
    time_zone: Mapped[Name]
    status: Mapped[Code]
    close_reason: Mapped[Code | None]
    close_note: Mapped[Long | None]
    spread: Mapped[Code | None] = mapped_column(comment="fixed in the plan; empty until it is locked")
    revision: Mapped[Big]
    created_at: Mapped[datetime]
    created_by: Mapped[int] = mapped_column(ForeignKey("person.id"))
    started_at: Mapped[datetime | None]
    closed_at: Mapped[datetime | None]


class Plan(Base):
    """What was promised before the first trial."""

    __tablename__ = "plan"
    __table_args__ = (
        CheckConstraint(one_of("looks", "closed", "as_you_go"), name="looks"),
        CheckConstraint("per_cell > 0 AND planned > 0", name="size"),
    )

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    per_cell: Mapped[int]
    planned: Mapped[Big]
    alpha: Mapped[Decimals]
    looks: Mapped[Code]
    tau_squared: Mapped[Decimals | None] = mapped_column(comment="tuning of the anytime interval, spread-squared units")
    planning_variance: Mapped[Decimals | None]
    comparisons: Mapped[list[Any]]
    trials_a_week: Mapped[Decimals | None] = mapped_column(comment="of the live operation")
    locked_at: Mapped[datetime]
    locked_by: Mapped[int] = mapped_column(ForeignKey("person.id"))


class Amendment(Base):
    """A dated change of a locked plan."""

    __tablename__ = "amendment"

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    at: Mapped[datetime]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    what: Mapped[Code]
    before: Mapped[Long]
    after: Mapped[Long]
    reason: Mapped[Long]
    trials_logged: Mapped[Big]


class StudyFactor(Base):
    """A factor as one study uses it."""

    __tablename__ = "study_factor"
    __table_args__ = (
        UniqueConstraint("study_id", "factor_id"),
        CheckConstraint(one_of("role", "treatment", "block", "held"), name="role"),
    )

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    factor_id: Mapped[int] = mapped_column(ForeignKey("factor.id"))
    role: Mapped[Code]
    set_anew: Mapped[bool] = mapped_column(default=True, comment="can it be set anew for every trial?")


class StudyLevel(Base):
    """A level as one study uses it; a held factor has exactly one."""

    __tablename__ = "study_level"
    __table_args__ = (
        UniqueConstraint("study_id", "position", "level_id"),
        ForeignKeyConstraint(["study_id", "position"], ["study_factor.study_id", "study_factor.position"]),
    )

    study_id: Mapped[int] = mapped_column(primary_key=True)
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    rank: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    level_id: Mapped[int] = mapped_column(ForeignKey("level.id"))


class StudyResponse(Base):
    """A response as one study records it: unit, step, anchor, margin."""

    __tablename__ = "study_response"
    __table_args__ = (
        UniqueConstraint("study_id", "rank"),
        CheckConstraint(one_of("scale", "raw", "log"), name="scale"),
    )

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    response_id: Mapped[int] = mapped_column(ForeignKey("response.id"), primary_key=True)
    rank: Mapped[int]
    unit: Mapped[Code]
    step: Mapped[Decimals]
    anchor: Mapped[Big | None] = mapped_column(comment="the first reading logged, in steps; it stays")
    margin: Mapped[Decimals | None]
    guard_margin: Mapped[Decimals | None]
    scale: Mapped[Code]
    unit_value: Mapped[Decimals | None] = mapped_column(comment="what one unit is worth")


class Cell(Base):
    """One combination of levels, the block's included."""

    __tablename__ = "cell"

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    weight: Mapped[Decimals | None] = mapped_column(comment="share of the live operation, when stated")


class CellLevel(Base):
    """The level that a cell has of one factor."""

    __tablename__ = "cell_level"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "cell"], ["cell.study_id", "cell.number"]),
        ForeignKeyConstraint(
            ["study_id", "position", "rank"], ["study_level.study_id", "study_level.position", "study_level.rank"]
        ),
    )

    study_id: Mapped[int] = mapped_column(primary_key=True)
    cell: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    rank: Mapped[int]


class Run(Base):
    """One place in the run order."""

    __tablename__ = "run"
    __table_args__ = (
        ForeignKeyConstraint(["study_id", "cell"], ["cell.study_id", "cell.number"]),
        CheckConstraint(one_of("state", "waiting", "done", "skipped"), name="state"),
        CheckConstraint("(state = 'skipped') = (skip_reason IS NOT NULL)", name="skipped_with_reason"),
    )

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    cell: Mapped[int]
    block: Mapped[int | None]
    state: Mapped[Code]
    skip_reason: Mapped[Long | None]
    whole_plot: Mapped[int | None] = mapped_column(comment="unit that a factor hard to change is set for")
    generators: Mapped[Long | None] = mapped_column(comment="of the fraction, where there is one")
