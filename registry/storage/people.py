"""People, sessions and roles, found and written."""

from __future__ import annotations

import hashlib
from datetime import datetime

from sqlalchemy import delete, func, select
from sqlalchemy.orm import Session

from registry.storage.tables import Membership, Person, SignedSession


def person_by_address(session: Session, address: str) -> Person | None:
    """Find somebody by e-mail address, in whatever case it was typed."""
    return session.scalars(select(Person).where(Person.address == address.strip().lower())).first()


def count_people(session: Session) -> int:
    """Count the accounts."""
    return session.scalar(select(func.count()).select_from(Person)) or 0


def new_person(session: Session, *, name: str, address: str, password_hash: str, keeper: bool, now: datetime) -> Person:
    """Add somebody; the row has its key when this returns."""
    row = Person(
        name=name, address=address.lower(), password_hash=password_hash, keeper=keeper, created_at=now, shut_out_at=None
    )
    session.add(row)
    session.flush()  # The key is needed by the event that tells of the new person.
    return row


def hash_of_token(token: str) -> str:
    """Give what is kept of a token: enough to know it again, not enough to use it."""
    return hashlib.sha256(token.encode()).hexdigest()


def open_session(session: Session, person_id: int, token: str, *, now: datetime, expires: datetime) -> None:
    """Set down a new signed-in session, and clear those that have run out."""
    session.execute(delete(SignedSession).where(SignedSession.expires_at <= now))
    session.add(SignedSession(token_hash=hash_of_token(token), person_id=person_id, created_at=now, expires_at=expires))


def person_of_token(session: Session, token: str, *, now: datetime) -> Person | None:
    """Find who a session's token belongs to, if it is open and the person is not shut out."""
    return session.scalars(
        select(Person)
        .join(SignedSession, SignedSession.person_id == Person.id)
        .where(
            SignedSession.token_hash == hash_of_token(token),
            SignedSession.expires_at > now,
            Person.shut_out_at.is_(None),
        )
    ).first()


def close_session(session: Session, token: str) -> None:
    """End a signed-in session."""
    session.execute(delete(SignedSession).where(SignedSession.token_hash == hash_of_token(token)))


def role_of(session: Session, person_id: int, series_id: int) -> str | None:
    """Say which role somebody has in a series."""
    membership = session.get(Membership, (series_id, person_id))
    return membership.role if membership else None


def set_role(session: Session, person_id: int, series_id: int, *, role: str, now: datetime) -> str | None:
    """Give somebody a role in a series; returns the one before."""
    membership = session.get(Membership, (series_id, person_id))
    if membership is None:
        session.add(Membership(series_id=series_id, person_id=person_id, role=role, granted_at=now))
        return None
    before, membership.role, membership.granted_at = membership.role, role, now
    return before
