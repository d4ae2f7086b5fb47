"""Reader links: read-only addresses for people without an account, fixed or live."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import TYPE_CHECKING, Any, Literal

from registry.errors import Fault, InputRefused, NotFound, NotNow
from registry.services.access import Role, require_series
from registry.services.comparison import comparison_of
from registry.services.people import Person
from registry.services.study_card import card_of
from registry.services.study_report import report_of, report_record
from registry.storage.engine import Database
from registry.storage.history import append_registry_event
from registry.storage.links import LinkRow, add_link, link_with_hash, links_of_series, lock_link
from registry.storage.people import hash_of_token
from registry.storage.studies import find_series, find_study, studies_of

if TYPE_CHECKING:
    from registry.storage.tables import ReaderLink, Study

FORMAT = "weftbook.reader/1"
Scope = Literal["study", "comparison"]
LONGEST_DAYS = 3660
# What a page draws from a record, by name; the web hands it over, so that services draw nothing.
Draw = Callable[[str, Mapping[str, Any]], Mapping[str, str]]


@dataclass(frozen=True)
class LinkDraft:
    """A link about to be made; ``days`` as typed, empty for one that does not expire."""

    scope: str
    study_id: int
    beside: int | None
    response: str | None
    kind: str
    days: str


@dataclass(frozen=True)
class LinkLine:
    """A reader link as its makers see it: never with its token, which is not kept."""

    id: int
    what: str
    scope: str
    kind: str
    made_by: str
    made_at: datetime
    expires_at: datetime | None
    revoked_at: datetime | None
    open: bool


@dataclass(frozen=True)
class SeriesLinks:
    """The reader links of a series, the newest first."""

    series_id: int
    series_name: str
    role: Role
    links: tuple[LinkLine, ...]


@dataclass(frozen=True)
class Proposal:
    """What a new link would show, in words."""

    series_id: int
    series_name: str
    what: str


@dataclass(frozen=True)
class ReaderPage:
    """What somebody with a link reads; ``content`` is the record that the page and its twin are made of."""

    kind: str
    scope: str
    made_at: datetime
    expires_at: datetime | None
    content: Mapping[str, Any]


def propose_link(database: Database, person: Person, series_id: int, draft: LinkDraft) -> Proposal:
    """Say what a link would show, before it is made."""
    with database.read() as session:
        series, _ = require_series(session, person, series_id, at_least="analyst")
        _study(session, series_id, draft.study_id)
        return Proposal(series_id, series.name, _what(session, _subject(draft), draft.scope))


def make_link(
    database: Database, person: Person, series_id: int, draft: LinkDraft, *, token: str, draw: Draw, now: datetime
) -> int:
    """Make a reader link for whoever is given its token, of which only a hash is kept.

    A fixed one keeps the record and drawings of the page as they are now; a live one makes
    them anew each time. Raises InputRefused with every fault.
    """
    expires_at = _checked(draft, now)
    with database.write() as session:
        require_series(session, person, series_id, at_least="analyst")
        _study(session, series_id, draft.study_id)
        subject = _subject(draft)
        content = _content(session, draft.scope, subject, draw=draw, now=now)
        link_id = add_link(
            session,
            {
                "series_id": series_id,
                "scope": draft.scope,
                "subject": subject,
                "kind": draft.kind,
                "content": _as_text(content) if draft.kind == "fixed" else None,
                "token_hash": hash_of_token(token),
                "made_by": person.id,
                "made_at": now,
                "expires_at": expires_at,
            },
        )
        told = json.dumps({"link": link_id, "scope": draft.scope, "kind": draft.kind, **subject}, ensure_ascii=False)
        append_registry_event(session, "reader_link_made", person_id=person.id, after=told, now=now)
        return link_id


def _checked(draft: LinkDraft, now: datetime) -> datetime | None:
    faults = []
    if draft.scope not in ("study", "comparison"):
        faults.append(Fault("what it shows", f"{draft.scope!r} given", "choose study or comparison", "scope"))
    if draft.kind not in ("fixed", "live"):
        faults.append(Fault("kind", f"{draft.kind!r} given", "choose fixed or live", "kind"))
    text = draft.days.strip()
    days = int(text) if text.isascii() and text.isdigit() and len(text) < 6 else 0
    if text and not 1 <= days <= LONGEST_DAYS:
        faults.append(
            Fault("days", f"{text!r} given", f"give a whole number from 1 to {LONGEST_DAYS}, or leave it empty", "days")
        )
    if faults:
        raise InputRefused(faults)
    return now + timedelta(days=days) if text else None


def _study(session: Any, series_id: int, study_id: int) -> Study:
    study = find_study(session, study_id)
    if study is None or study.series_id != series_id:
        raise NotFound(Fault("study", f"there is no study {study_id} in this series", "choose one of its studies"))
    return study


def _subject(draft: LinkDraft) -> dict[str, Any]:
    subject: dict[str, Any] = {"study": draft.study_id, "response": draft.response}
    return subject | {"beside": draft.beside} if draft.scope == "comparison" else subject


def _what(session: Any, subject: Mapping[str, Any], scope: str) -> str:
    title = _title(session, subject["study"])
    if scope == "comparison":
        beside = subject.get("beside")
        return f"{title} beside {_title(session, beside) if beside else 'the study before'}"
    return title


def _title(session: Any, study_id: int) -> str:
    study = find_study(session, study_id)
    return study.title if study else f"study {study_id}"


def _content(session: Any, scope: str, subject: Mapping[str, Any], *, draw: Draw, now: datetime) -> dict[str, Any]:
    """Make the record that a reader's page is made of; names of people do not stand in it."""
    study = find_study(session, subject["study"])
    if study is None:
        raise NotFound(Fault("study", f"there is no study {subject['study']}", "it was there when the link was made"))
    series = find_series(session, study.series_id)
    record = _comparison(session, study, subject) if scope == "comparison" else _report(session, study, subject)
    return {
        "format": FORMAT,
        "scope": scope,
        "as_of": now.isoformat(timespec="seconds"),
        "series": series.name if series else "",
        "record": record,
        "drawings": dict(draw(scope, record)),
    }


def _report(session: Any, study: Study, subject: Mapping[str, Any]) -> dict[str, Any]:
    report = report_of(session, card_of(session, study, "viewer"), response=subject["response"])
    return report_record(report) | {"places": report.places}


def _comparison(session: Any, study: Study, subject: Mapping[str, Any]) -> dict[str, Any]:
    if study.status != "closed":
        raise NotNow(Fault(study.title, f"it is {study.status}", "only closed studies are compared; close it first"))
    found = comparison_of(
        session, study.series_id, study.id, role="viewer", beside=subject["beside"], response=subject["response"]
    )
    return found.record | {"places": found.places, "unit_name": found.unit_name}


def _as_text(content: Mapping[str, Any]) -> str:
    return json.dumps(content, ensure_ascii=False, allow_nan=False)


def series_links(database: Database, person: Person, series_id: int, *, now: datetime) -> SeriesLinks:
    """List the reader links of a series, those that no longer open as well."""
    with database.read() as session:
        series, role = require_series(session, person, series_id, at_least="analyst")
        titles = {study.id: study.title for study in studies_of(session, [series_id])}
        links = tuple(_line(row, titles, now) for row in links_of_series(session, series_id))
        return SeriesLinks(series.id, series.name, role, links)


def _line(row: LinkRow, titles: Mapping[int, str], now: datetime) -> LinkLine:
    link, subject = row.link, row.link.subject
    what = titles.get(subject["study"], "")
    if link.scope == "comparison":
        beside = subject.get("beside")
        what += f" beside {titles.get(beside, '') if beside else 'the study before'}"
    return LinkLine(
        link.id, what, link.scope, link.kind, row.maker, link.made_at, link.expires_at, link.revoked_at,
        open=_opens(link, now),
    )  # fmt: skip


def _opens(link: ReaderLink, now: datetime) -> bool:
    return link.revoked_at is None and (link.expires_at is None or now < link.expires_at)


def revoke_link(database: Database, person: Person, series_id: int, link_id: int, *, now: datetime) -> None:
    """Shut a reader link for good; revoking it again changes nothing."""
    with database.write() as session:
        require_series(session, person, series_id, at_least="analyst")
        link = lock_link(session, series_id, link_id)
        if link is None:
            raise NotFound(Fault("reader link", f"this series has no link {link_id}", "choose one from the list"))
        if link.revoked_at is None:
            link.revoked_at = now
            told = json.dumps({"link": link_id})
            append_registry_event(session, "reader_link_revoked", person_id=person.id, after=told, now=now)


def read_link(database: Database, token: str, *, draw: Draw, now: datetime) -> ReaderPage:
    """Give what a link shows. Unknown, expired and revoked links are all the same: not found."""
    with database.read() as session:
        link = link_with_hash(session, hash_of_token(token))
        if link is None or not _opens(link, now):
            raise NotFound(Fault("reader link", "it does not open", "ask whoever gave it to you for a new one"))
        if link.content is not None:
            content = json.loads(link.content)
        else:
            content = _content(session, link.scope, link.subject, draw=draw, now=now)
        return ReaderPage(link.kind, link.scope, link.made_at, link.expires_at, content)
