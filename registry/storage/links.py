"""Reader links: made, listed, found by their token's hash, revoked."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import select
from sqlalchemy.orm import Session

from registry.storage.tables import Person, ReaderLink


@dataclass(frozen=True)
class LinkRow:
    """A reader link and who made it."""

    link: ReaderLink
    maker: str


def add_link(session: Session, fields: Mapping[str, Any]) -> int:
    """Set down a reader link; returns its key."""
    row = ReaderLink(passcode_hash=None, revoked_at=None, **fields)
    session.add(row)
    session.flush()  # The caller's event names the key.
    return row.id


def links_of_series(session: Session, series_id: int) -> list[LinkRow]:
    """List the reader links of a series, the newest first."""
    rows = session.execute(
        select(ReaderLink, Person.name)
        .join(Person, Person.id == ReaderLink.made_by)
        .where(ReaderLink.series_id == series_id)
        .order_by(ReaderLink.id.desc())
    )
    return [LinkRow(link, name) for link, name in rows]


def link_with_hash(session: Session, token_hash: str) -> ReaderLink | None:
    """Find a link by the hash of its token."""
    return session.scalars(select(ReaderLink).where(ReaderLink.token_hash == token_hash)).first()


def lock_link(session: Session, series_id: int, link_id: int) -> ReaderLink | None:
    """Find a link of a series for changing it."""
    return session.scalars(
        select(ReaderLink).where(ReaderLink.id == link_id, ReaderLink.series_id == series_id).with_for_update()
    ).first()
