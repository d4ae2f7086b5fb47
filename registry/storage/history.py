"""Event chains: each event carries the hash of the one before."""

from __future__ import annotations

import hashlib
import json
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from registry.storage.tables import Event, FreeText, Person, RegistryEvent, Response

START = "0" * 64


@dataclass(frozen=True)
class Happening:
    """What is to be set down as an event: a code, the place, before and after as text, and words.

    ``words`` are kept as free text with the event; ``text`` is free text that was kept
    already because something else refers to it too (a trial's note).
    """

    what: str
    trial: int | None = None
    response_id: int | None = None
    before: str | None = None
    after: str | None = None
    words: str | None = None
    text: FreeText | None = None


def append_events(
    session: Session, study_id: int, happenings: Sequence[Happening], *, person_id: int, now: datetime
) -> None:
    """Add events to a study's chain; the caller holds the study's row locked."""
    last = session.execute(
        select(Event.number, Event.hash).where(Event.study_id == study_id).order_by(Event.number.desc()).limit(1)
    ).first()
    number, previous = (last.number, last.hash) if last else (0, START)
    for happening in happenings:
        number += 1
        event = _link(session, study_id, happening, number=number, previous=previous, person_id=person_id, now=now)
        session.add(event)
        previous = event.hash
    session.flush()  # The next unit of the same transaction must see where the chain ends.


def _link(
    session: Session,
    study_id: int,
    happening: Happening,
    *,
    number: int,
    previous: str,
    person_id: int,
    now: datetime,
) -> Event:
    text = keep_text(session, study_id, happening.words) if happening.words else happening.text
    event = Event(
        study_id=study_id,
        number=number,
        at=now,
        person_id=person_id,
        what=happening.what,
        trial=happening.trial,
        response_id=happening.response_id,
        before=happening.before,
        after=happening.after,
        text_number=text.number if text else None,
        text_hash=salted(text) if text else None,
        previous=previous,
    )
    event.hash = hash_of_event(event)
    return event


def keep_text(session: Session, study_id: int, body: str) -> FreeText:
    """Set down one free text where it can be erased later; returns its row."""
    return keep_texts(session, study_id, [body])[0]


def keep_texts(session: Session, study_id: int, bodies: Sequence[str]) -> list[FreeText]:
    """Set down free texts where they can be erased later; returns their rows."""
    last = session.scalar(select(func.max(FreeText.number)).where(FreeText.study_id == study_id)) or 0
    texts = [
        FreeText(study_id=study_id, number=number, salt=secrets.token_hex(16), body=body)
        for number, body in enumerate(bodies, start=last + 1)
    ]
    session.add_all(texts)
    session.flush()  # The numbers are taken; an event or a note refers to them next.
    return texts


def lock_registry(session: Session) -> None:
    """Let one writer at a time name what the whole registry, or a series, shares; SQLite has one writer anyway."""
    if session.get_bind().dialect.name == "postgresql":
        session.execute(select(func.pg_advisory_xact_lock(0x57454654)))


def append_registry_event(
    session: Session, what: str, *, person_id: int, before: str | None = None, after: str | None = None, now: datetime
) -> None:
    """Add an event to the registry's own chain."""
    lock_registry(session)  # Two writers must not both build on the same last link.
    last = session.execute(
        select(RegistryEvent.number, RegistryEvent.hash).order_by(RegistryEvent.number.desc()).limit(1)
    ).first()
    number, previous = (last.number, last.hash) if last else (0, START)
    event = RegistryEvent(
        number=number + 1, at=now, person_id=person_id, what=what, before=before, after=after, previous=previous
    )
    event.hash = hash_of_registry_event(event)
    session.add(event)
    session.flush()


def hash_of_event(event: Event) -> str:
    """Hash everything an event says, with the hash of the one before it."""
    return _hash(
        event.previous, event.study_id, event.number, _stamp(event.at), event.person_id, event.what, event.trial,
        event.response_id, event.before, event.after, event.text_number, event.text_hash,
    )  # fmt: skip


def hash_of_registry_event(event: RegistryEvent) -> str:
    """Hash everything a registry event says, with the hash of the one before it."""
    return _hash(event.previous, event.number, _stamp(event.at), event.person_id, event.what, event.before, event.after)


@dataclass(frozen=True)
class EventRow:
    """One event with the names and words that belong to it."""

    number: int
    at: datetime
    person: str
    what: str
    trial: int | None
    response: str | None
    before: str | None
    after: str | None
    words: str | None


def count_events(session: Session, study_id: int) -> int:
    """Count the events of a study's chain."""
    return session.scalar(select(func.count()).where(Event.study_id == study_id)) or 0


def newest_events(session: Session, study_id: int, *, trial: int | None, limit: int, offset: int) -> list[EventRow]:
    """Give events of a study, or of one of its trials, the newest first."""
    statement = (
        select(Event, Person.name, Response.name, FreeText.body)
        .join(Person, Person.id == Event.person_id)
        .outerjoin(Response, Response.id == Event.response_id)
        .outerjoin(FreeText, (FreeText.study_id == Event.study_id) & (FreeText.number == Event.text_number))
        .where(Event.study_id == study_id)
        .order_by(Event.number.desc())
        .limit(limit)
        .offset(offset)
    )
    if trial is not None:
        statement = statement.where(Event.trial == trial)
    return [
        EventRow(
            number=event.number,
            at=event.at,
            person=person,
            what=event.what,
            trial=event.trial,
            response=response,
            before=event.before,
            after=event.after,
            words="(erased)" if event.text_number is not None and body is None else body,
        )
        for event, person, response, body in session.execute(statement)
    ]


def broken_links(session: Session, study_id: int) -> list[str]:
    """Name every event of a study whose hash, place or text is not what the chain vouches for."""
    faults: list[str] = []
    texts = {text.number: text for text in session.scalars(select(FreeText).where(FreeText.study_id == study_id))}
    previous = START
    rows = session.scalars(select(Event).where(Event.study_id == study_id).order_by(Event.number))
    for place, event in enumerate(rows.yield_per(1000), start=1):
        where = f"study {study_id}, event {event.number}"
        if event.number != place:
            faults.append(f"{where}: event {place} is missing")
            break
        if event.previous != previous or hash_of_event(event) != event.hash:
            faults.append(f"{where} ({event.what}): its content does not fit the chain")
        text = texts.get(event.text_number) if event.text_number is not None else None
        if event.text_number is not None and (
            text is None or (text.body is not None and salted(text) != event.text_hash)
        ):
            faults.append(f"{where} ({event.what}): the words beside it were altered")
        previous = event.hash
    return faults


def broken_registry_links(session: Session) -> list[str]:
    """Name every event of the registry's own chain that does not fit it."""
    faults: list[str] = []
    previous = START
    rows = session.scalars(select(RegistryEvent).order_by(RegistryEvent.number))
    for place, event in enumerate(rows.yield_per(1000), start=1):
        where = f"registry, event {event.number}"
        if event.number != place:
            faults.append(f"{where}: event {place} is missing")
            break
        if event.previous != previous or hash_of_registry_event(event) != event.hash:
            faults.append(f"{where} ({event.what}): its content does not fit the chain")
        previous = event.hash
    return faults


def _hash(*parts: str | int | None) -> str:
    return hashlib.sha256(json.dumps(parts, ensure_ascii=True, separators=(",", ":")).encode()).hexdigest()


def _stamp(at: datetime) -> str:
    return at.astimezone(UTC).isoformat(timespec="microseconds")


def salted(text: FreeText) -> str:
    """Hash a free text with its salt: this stays in the chain when the text is erased."""
    return hashlib.sha256(f"{text.salt}{text.body}".encode()).hexdigest()
