"""Tables of what leaves a study or comes into it: decisions, reader links, pinned results, imports."""

from __future__ import annotations

from datetime import date, datetime
from typing import Any

from sqlalchemy import BigInteger, CheckConstraint, ForeignKey, Index, LargeBinary, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Big, Code, Decimals, Hash, Id, Long, Name, one_of


class Decision(Base):
    """What was decided on a study, and later whether it held."""

    __tablename__ = "decision"
    __table_args__ = (CheckConstraint(one_of("held", "yes", "partly", "no"), name="held"),)

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    decided_at: Mapped[datetime]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    what: Mapped[Long]
    from_day: Mapped[date | None]
    expected_saving: Mapped[Decimals | None]
    saving_unit: Mapped[Code | None]
    review_day: Mapped[date | None]
    held: Mapped[Code | None]
    held_note: Mapped[Long | None]
    held_at: Mapped[datetime | None]


class PinnedResult(Base):
    """The result as it stood when a study closed, and after each change of its trials since."""

    __tablename__ = "pinned_result"

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    at: Mapped[datetime]
    headline: Mapped[Long]
    content: Mapped[Long]
    fingerprint: Mapped[Hash]


class ReaderLink(Base):
    """A read-only address for somebody without an account."""

    __tablename__ = "reader_link"
    __table_args__ = (
        UniqueConstraint("token_hash"),
        CheckConstraint(one_of("kind", "fixed", "live"), name="kind"),
        CheckConstraint(one_of("scope", "study", "comparison", "series", "board"), name="scope"),
        CheckConstraint("kind = 'live' OR content IS NOT NULL", name="fixed_has_content"),
        Index("ix_reader_link_series_id", "series_id"),
    )

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"))
    scope: Mapped[Code]
    subject: Mapped[dict[str, Any]] = mapped_column(comment="which studies and choices the page shows")
    kind: Mapped[Code]
    content: Mapped[Long | None]
    token_hash: Mapped[Hash]
    passcode_hash: Mapped[Long | None]
    made_by: Mapped[int] = mapped_column(ForeignKey("person.id"))
    made_at: Mapped[datetime]
    expires_at: Mapped[datetime | None]
    revoked_at: Mapped[datetime | None]


class ReaderLinkVisits(Base):
    """How often a reader link was opened; counted outside the record."""

    __tablename__ = "reader_link_visits"

    link_id: Mapped[int] = mapped_column(ForeignKey("reader_link.id"), primary_key=True)
    visits: Mapped[Big]
    last_at: Mapped[datetime]


class ImportJob(Base):
    """A file given for import, kept until it is taken in or dropped."""

    __tablename__ = "import_job"
    __table_args__ = (CheckConstraint(one_of("state", "waiting", "done", "dropped"), name="state"),)

    study_id: Mapped[int] = mapped_column(ForeignKey("study.id"), primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    name: Mapped[Name]
    content: Mapped[bytes | None] = mapped_column(LargeBinary)
    digest: Mapped[Hash]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"))
    given_at: Mapped[datetime]
    state: Mapped[Code]
    ended_at: Mapped[datetime | None]
    first_trial: Mapped[int | None] = mapped_column(BigInteger)
    last_trial: Mapped[int | None] = mapped_column(BigInteger)


class ColumnMapping(Base):
    """What the columns of a file with these heads meant last time, in this series."""

    __tablename__ = "column_mapping"

    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"), primary_key=True)
    heads_digest: Mapped[Hash] = mapped_column(primary_key=True)
    choices: Mapped[list[Any]]
    used_at: Mapped[datetime]
