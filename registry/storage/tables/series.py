"""Tables of what the studies of a series share: responses, factors, levels, conditions."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Code, Decimals, Id, Long, Name, one_of


class Series(Base):
    """A line of studies that ask about the same operation."""

    __tablename__ = "series"
    __table_args__ = (UniqueConstraint("name"),)

    id: Mapped[Id]
    name: Mapped[Name]
    about: Mapped[Long]
    created_at: Mapped[datetime]
    created_by: Mapped[int] = mapped_column(ForeignKey("person.id"))


class Response(Base):
    """Something that is read off every trial of a series."""

    __tablename__ = "response"
    __table_args__ = (
        UniqueConstraint("series_id", "name"),
        CheckConstraint(one_of("wanted", "lower", "higher", "none"), name="wanted"),
        CheckConstraint(one_of("kind", "measured", "yes_no"), name="kind"),
        CheckConstraint(one_of("part", "primary", "guard"), name="part"),
        CheckConstraint("(numerator_id IS NULL) = (denominator_id IS NULL)", name="quotient_whole"),
    )

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"))
    name: Mapped[Name]
    about: Mapped[Long]
    dimension: Mapped[Code]
    wanted: Mapped[Code]
    kind: Mapped[Code]
    part: Mapped[Code]
    plausible_low: Mapped[Decimals | None]
    plausible_high: Mapped[Decimals | None]
    numerator_id: Mapped[int | None] = mapped_column(ForeignKey("response.id"))
    denominator_id: Mapped[int | None] = mapped_column(ForeignKey("response.id"))


class Factor(Base):
    """Something that is set for a trial."""

    __tablename__ = "factor"
    __table_args__ = (UniqueConstraint("series_id", "name"),)

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"))
    name: Mapped[Name]
    about: Mapped[Long]


class Level(Base):
    """One setting of a factor, with a stable identity; a changed meaning is a new level."""

    __tablename__ = "level"
    __table_args__ = (UniqueConstraint("factor_id", "name"),)

    id: Mapped[Id]
    factor_id: Mapped[int] = mapped_column(ForeignKey("factor.id"))
    name: Mapped[Name]
    definition: Mapped[Long]
    running: Mapped[Long] = mapped_column(comment="what running this level means on the floor")
    replaces_id: Mapped[int | None] = mapped_column(
        ForeignKey("level.id"), comment="the level that this one was until its meaning changed"
    )


class LevelAlias(Base):
    """Another name that the same level has gone by."""

    __tablename__ = "level_alias"

    level_id: Mapped[int] = mapped_column(ForeignKey("level.id"), primary_key=True)
    name: Mapped[Name] = mapped_column(primary_key=True)


class Condition(Base):
    """Something noted beside a trial: crew, vehicle, order lines, weather."""

    __tablename__ = "condition"
    __table_args__ = (UniqueConstraint("series_id", "name"),)

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"))
    name: Mapped[Name]
    about: Mapped[Long]
