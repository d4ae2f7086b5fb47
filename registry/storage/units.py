"""Writing one study: its row is locked, its revision raised, its event set down."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session

from registry.errors import Fault, NotFound
from registry.storage.engine import Database
from registry.storage.history import Happening, append_events
from registry.storage.tables import Study


@dataclass
class StudyUnit:
    """An open write on one study: what is recorded here becomes its events when the block ends."""

    session: Session
    study: Study
    happenings: list[Happening] = field(default_factory=list)

    def record(self, happening: Happening) -> None:
        """Note an event; it is chained when the unit of work is kept."""
        self.happenings.append(happening)


@contextmanager
def write_study(database: Database, study_id: int, *, person_id: int, now: datetime) -> Iterator[StudyUnit]:
    """Lock one study for writing; raise its revision and chain its events if anything was recorded."""
    with database.write() as session:
        study = session.scalar(select(Study).where(Study.id == study_id).with_for_update())
        if study is None:
            raise NotFound(Fault("study", f"there is no study {study_id}", "choose one from Studies"))
        unit = StudyUnit(session, study)
        yield unit
        if unit.happenings:
            study.revision += 1
            append_events(session, study_id, unit.happenings, person_id=person_id, now=now)
