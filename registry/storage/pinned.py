"""Results pinned when a study closes: the record as it stood then, in one text."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from registry.storage.tables import PinnedResult


def pin(session: Session, study_id: int, *, headline: str, content: str, now: datetime) -> None:
    """Set down a result after those pinned before it; the fingerprint is the hash of its content."""
    last = session.scalar(select(func.max(PinnedResult.number)).where(PinnedResult.study_id == study_id))
    session.add(
        PinnedResult(
            study_id=study_id,
            number=(last or 0) + 1,
            at=now,
            headline=headline,
            content=content,
            fingerprint=hashlib.sha256(content.encode()).hexdigest(),
        )
    )


def latest_headlines(session: Session, study_ids: Sequence[int]) -> dict[int, str]:
    """Give the one sentence of the latest pinned result of some studies, by study, in one query."""
    latest = (
        select(PinnedResult.study_id, func.max(PinnedResult.number).label("number"))
        .where(PinnedResult.study_id.in_(study_ids))
        .group_by(PinnedResult.study_id)
        .subquery()
    )
    rows = session.execute(
        select(PinnedResult.study_id, PinnedResult.headline).join(
            latest,
            (latest.c.study_id == PinnedResult.study_id) & (latest.c.number == PinnedResult.number),
        )
    )
    return {row.study_id: row.headline for row in rows}
