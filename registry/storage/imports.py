"""Files given for import, kept until they are taken in or dropped, and what their columns meant last time."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from registry.storage.tables import ColumnMapping, ImportJob


def keep_upload(
    session: Session, study_id: int, *, name: str, content: bytes, person_id: int, now: datetime
) -> ImportJob:
    """Keep a file as it was given; returns its job."""
    number = session.scalar(select(func.max(ImportJob.number)).where(ImportJob.study_id == study_id)) or 0
    job = ImportJob(
        study_id=study_id,
        number=number + 1,
        name=name,
        content=content,
        digest=hashlib.sha256(content).hexdigest(),
        person_id=person_id,
        given_at=now,
        state="waiting",
    )
    session.add(job)
    return job


def find_upload(session: Session, study_id: int, number: int) -> ImportJob | None:
    """Find an import job of a study by its number."""
    return session.get(ImportJob, (study_id, number))


def earlier_import(session: Session, study_id: int, digest: str) -> ImportJob | None:
    """Find a finished import of the very same file into the same study."""
    return session.scalars(
        select(ImportJob).where(ImportJob.study_id == study_id, ImportJob.digest == digest, ImportJob.state == "done")
    ).first()


def remembered_choices(session: Session, series_id: int, heads: Sequence[str]) -> list[list[str]] | None:
    """Say what columns with these heads meant last time in this series."""
    mapping = session.get(ColumnMapping, (series_id, _digest(heads)))
    return [list(choice) for choice in mapping.choices] if mapping else None


def remember_choices(
    session: Session, series_id: int, heads: Sequence[str], choices: list[list[str]], *, now: datetime
) -> None:
    """Keep what columns with these heads meant, for the next file of this series."""
    session.merge(ColumnMapping(series_id=series_id, heads_digest=_digest(heads), choices=choices, used_at=now))


def _digest(heads: Sequence[str]) -> str:
    return hashlib.sha256(json.dumps(list(heads), ensure_ascii=True).encode()).hexdigest()
