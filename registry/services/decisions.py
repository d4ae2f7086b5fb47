"""What was decided on a study, from when, what it should save, and whether it held."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from typing import TYPE_CHECKING, Any

from registry.errors import Fault, InputRefused, NotFound, NotNow, ReadingRefused
from registry.services.access import require_study
from registry.services.people import Person
from registry.services.study_card import StudyCard, open_study_card
from registry.services.text_check import checked_text
from registry.storage.decisions import add_decision, decisions_of, find_decision
from registry.storage.engine import Database
from registry.storage.history import Happening
from registry.storage.units import write_study
from registry.trials.readings import read_decimal

if TYPE_CHECKING:
    from registry.storage.tables import Decision

HELD = ("yes", "partly", "no")
LONGEST_UNIT = 20


@dataclass(frozen=True)
class DecisionDraft:
    """A decision about to be set down; days and saving as typed, empty where nothing is said."""

    what: str
    from_day: str
    expected_saving: str
    saving_unit: str
    review_day: str


@dataclass(frozen=True)
class DecisionShown:
    """A decision as people read it; ``due`` says that its review day has come and nothing was said yet."""

    number: int
    what: str
    person: str
    decided_at: datetime
    from_day: date | None
    expected_saving: str | None
    saving_unit: str | None
    review_day: date | None
    held: str | None
    held_note: str | None
    held_at: datetime | None
    due: bool


@dataclass(frozen=True)
class DecisionList:
    """The decisions of a study, the newest first."""

    card: StudyCard
    decisions: tuple[DecisionShown, ...]


def study_decisions(database: Database, person: Person, study_id: int, *, today: date) -> DecisionList:
    """List what was decided on a study."""
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        shown = tuple(_shown(decision, name, today) for decision, name in decisions_of(session, study_id))
        return DecisionList(card, shown)


def _shown(decision: Decision, name: str, today: date) -> DecisionShown:
    return DecisionShown(
        number=decision.number,
        what=decision.what,
        person=name,
        decided_at=decision.decided_at,
        from_day=decision.from_day,
        expected_saving=decision.expected_saving,
        saving_unit=decision.saving_unit,
        review_day=decision.review_day,
        held=decision.held,
        held_note=decision.held_note,
        held_at=decision.held_at,
        due=decision.held is None and decision.review_day is not None and decision.review_day <= today,
    )


def decide(database: Database, person: Person, study_id: int, draft: DecisionDraft, *, now: datetime) -> int:
    """Set down what was decided on a closed study; returns the decision's number."""
    fields = _checked(draft)
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        if unit.study.status != "closed":
            raise NotNow(Fault(unit.study.title, f"it is {unit.study.status}", "decide on a study once it is closed"))
        number = add_decision(unit.session, study_id, {**fields, "decided_at": now, "person_id": person.id})
        unit.record(Happening("decision_made", after=str(number), words=fields["what"]))
        return number


def _checked(draft: DecisionDraft) -> dict[str, Any]:
    faults: list[Fault] = []
    what = checked_text(draft.what, where="what was decided", field="what", faults=faults, needed=True)
    from_day = _day(draft.from_day, where="from", field="from_day", faults=faults)
    review_day = _day(draft.review_day, where="to be looked at again", field="review_day", faults=faults)
    if from_day and review_day and review_day < from_day:
        given = f"{review_day} lies before {from_day}"
        faults.append(Fault("to be looked at again", given, "give a day after it came into force", "review_day"))
    saving = _saving(draft.expected_saving, faults)
    unit = draft.saving_unit.strip()
    if saving is not None and not 1 <= len(unit) <= LONGEST_UNIT:
        given = f"{len(unit)} characters given" if unit else "nothing given"
        accepted = f"say of what, in 1 to {LONGEST_UNIT} characters, as in min a week"
        faults.append(Fault("saving, unit", given, accepted, "saving_unit"))
    if faults:
        raise InputRefused(faults)
    return {
        "what": what,
        "from_day": from_day,
        "review_day": review_day,
        "expected_saving": saving,
        "saving_unit": unit if saving is not None else None,
    }


def _day(text: str, *, where: str, field: str, faults: list[Fault]) -> date | None:
    if not text.strip():
        return None
    try:
        return date.fromisoformat(text.strip())
    except ValueError:
        faults.append(Fault(where, f"{text.strip()!r} given", "write the day as 2026-03-02, or leave it empty", field))
        return None


def _saving(text: str, faults: list[Fault]) -> str | None:
    if not text.strip():
        return None
    try:
        return f"{read_decimal(text):f}"
    except ReadingRefused as error:
        faults.append(Fault("saving", error.faults[0].given, "give a number, or leave it empty", "expected_saving"))
        return None


def say_whether_it_held(
    database: Database, person: Person, study_id: int, number: int, *, held: str, note: str, now: datetime
) -> None:
    """Set down whether a decision held: yes, partly, or no, and why; said once, it stays."""
    faults: list[Fault] = []
    if held not in HELD:
        faults.append(Fault("did it hold", f"{held!r} given", f"choose {', '.join(HELD)}", "held"))
    words = checked_text(note, where="what was seen", field="note", faults=faults, needed=True)
    if faults:
        raise InputRefused(faults)
    with write_study(database, study_id, person_id=person.id, now=now) as unit:
        require_study(unit.session, person, unit.study, at_least="analyst")
        decision = find_decision(unit.session, study_id, number)
        if decision is None:
            raise NotFound(Fault("decision", f"{unit.study.title} has no decision {number}", "choose one of its list"))
        if decision.held is not None:
            raise NotNow(Fault("decision", f"it was said to hold: {decision.held}", "set down a new decision instead"))
        decision.held, decision.held_note, decision.held_at = held, words, now
        unit.record(Happening("decision_reviewed", before=str(number), after=held, words=words))
