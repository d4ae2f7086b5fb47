"""Tables of the event chains and of the free text that they vouch for."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import BigInteger, ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Code, Hash, Long


class FreeText(Base):
    """Words somebody wrote about a study; may be erased by law without breaking the chain."""

    __tablename__ = "free_text"

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    salt: Mapped[Hash]
    body: Mapped[Long | None] = mapped_column(comment="empty once erased")
    erased_at: Mapped[datetime | None]


class Event(Base):
    """One link of a study's chain; never updated, never deleted."""

    __tablename__ = "event"
    __table_args__ = (ForeignKeyConstraint(["study_id", "text_number"], ["free_text.study_id", "free_text.number"]),)

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    at: Mapped[datetime]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    what: Mapped[Code]
    trial: Mapped[int | None] = mapped_column(BigInteger)
    response_id: Mapped[int | None]
    before: Mapped[Long | None]
    after: Mapped[Long | None]
    text_number: Mapped[int | None]
    text_hash: Mapped[Hash | None]
    previous: Mapped[Hash]
    hash: Mapped[Hash]


class RegistryEvent(Base):
    """One link of the registry's own chain: people, roles, series."""

    __tablename__ = "registry_event"

    number: Mapped[int] = mapped_column(BigInteger, primary_key=True, autoincrement=False)
    at: Mapped[datetime]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    what: Mapped[Code]
    before: Mapped[Long | None]
    after: Mapped[Long | None]
    previous: Mapped[Hash]
    hash: Mapped[Hash]
