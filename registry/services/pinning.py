"""Pinning what a study says when it closes, and again when a closed one is corrected."""

from __future__ import annotations

import json
from datetime import datetime

from registry.services.study_card import card_of
from registry.services.study_report import report_of, report_record
from registry.storage.pinned import pin
from registry.storage.units import StudyUnit


def pin_result(unit: StudyUnit, *, now: datetime) -> None:
    """Keep the record of a closed study's first response as it stands, in the unit of work that made it so."""
    unit.session.flush()  # What was just changed must be in what is read back.
    report = report_of(unit.session, card_of(unit.session, unit.study, "viewer"), response=None)
    content = json.dumps(report_record(report), ensure_ascii=False, allow_nan=False)
    pin(unit.session, unit.study.id, headline=report.headline, content=content, now=now)
