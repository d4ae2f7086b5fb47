"""Tables of people, their roles, and what lets them in."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from registry.storage.tables.base import Base, Code, Hash, Id, Long, Name, one_of

ROLES = ("viewer", "logger", "analyst", "keeper")


class Person(Base):
    """Somebody with an account; never deleted, only shut out, so that history keeps its authors."""

    __tablename__ = "person"
    __table_args__ = (UniqueConstraint("address"),)

    id: Mapped[Id]
    name: Mapped[Name]
    address: Mapped[Name] = mapped_column(comment="e-mail address in lower case")
    password_hash: Mapped[Long | None]
    keeper: Mapped[bool] = mapped_column(default=False, comment="of the whole registry")
    created_at: Mapped[datetime]
    shut_out_at: Mapped[datetime | None]


class Membership(Base):
    """What one person may do in one series."""

    __tablename__ = "membership"
    __table_args__ = (CheckConstraint(one_of("role", *ROLES), name="role"),)

    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"), primary_key=True)
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"), primary_key=True, index=True)
    role: Mapped[Code]
    granted_at: Mapped[datetime]


class SignedSession(Base):
    """One browser that is signed in; only the hash of its token is kept."""

    __tablename__ = "session"

    token_hash: Mapped[Hash] = mapped_column(primary_key=True)
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"), index=True)
    created_at: Mapped[datetime]
    expires_at: Mapped[datetime]


class Invitation(Base):
    """An offer of a role, open until it is accepted or expires."""

    __tablename__ = "invitation"
    __table_args__ = (UniqueConstraint("token_hash"), CheckConstraint(one_of("role", *ROLES), name="role"))

    id: Mapped[Id]
    series_id: Mapped[int] = mapped_column(ForeignKey("series.id"), index=True)
    address: Mapped[Name]
    role: Mapped[Code]
    token_hash: Mapped[Hash]
    invited_by: Mapped[int] = mapped_column(ForeignKey("person.id"))
    created_at: Mapped[datetime]
    expires_at: Mapped[datetime]
    accepted_at: Mapped[datetime | None]


class AccessToken(Base):
    """A bearer token for the API; only its hash is kept."""

    __tablename__ = "access_token"
    __table_args__ = (UniqueConstraint("token_hash"),)

    id: Mapped[Id]
    person_id: Mapped[int] = mapped_column(ForeignKey("person.id"), index=True)
    name: Mapped[Name]
    token_hash: Mapped[Hash]
    created_at: Mapped[datetime]
    expires_at: Mapped[datetime | None]
    revoked_at: Mapped[datetime | None]
