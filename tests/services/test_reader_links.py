"""Reader links: fixed or live, expiring, revoked, and never a way to change the record."""

from __future__ import annotations

import json
from collections.abc import Mapping
from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy import select, text

from registry.errors import InputRefused, NotAllowed, NotFound, NotNow
from registry.services.opening import Database
from registry.services.reader_links import (
    LinkDraft,
    make_link,
    propose_link,
    read_link,
    revoke_link,
    series_links,
)
from registry.services.trial_edit import correct_reading
from registry.services.upkeep import recount
from registry.storage.tables import ReaderLink
from tests.support.studies import (
    NOW,
    START,
    WALK,
    Place,
    a_study,
    change_everything,
    close_a_study,
    even_readings,
)
from tests.support.visitors import somebody_in

TOKEN = "a token nobody guesses"
READINGS = even_readings((WALK.levels, START.levels), lambda levels: 20.0 + len(levels[0]) / 10)


def draw(scope: str, record: Mapping[str, Any]) -> Mapping[str, str]:
    return {"picture": f"{scope} of {len(record)} parts"}


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def made(place: Place, *, kind: str, study: int, days: str = "", scope: str = "study", token: str = TOKEN) -> int:
    draft = LinkDraft(scope, study, None, None, kind, days)
    return make_link(place.database, place.keeper, place.series_id, draft, token=token, draw=draw, now=NOW)


def content(place: Place, *, token: str = TOKEN) -> str:
    page = read_link(place.database, token, draw=draw, now=NOW + timedelta(hours=2))
    return json.dumps(page.content, sort_keys=True, default=dict)


def test_a_fixed_link_stays_byte_identical_whatever_happens_later(place: Place) -> None:
    for at, levels in enumerate(READINGS):
        place.log(dict(zip(("walk", "start"), levels, strict=True)), {"minutes": "20.1"}, key=at)
    made(place, kind="fixed", study=place.study_id)
    made(place, kind="live", study=place.study_id, token="live")
    before, live_before = content(place), content(place, token="live")

    change_everything(place)

    assert content(place) == before
    assert content(place, token="live") != live_before
    assert recount(place.database).faults == ()


def test_a_fixed_comparison_stays_as_it_was_when_a_study_is_corrected(place: Place) -> None:
    first = close_a_study(place, title="Winter", readings=READINGS, starts=NOW - timedelta(days=90))
    second = close_a_study(place, title="Spring", readings=READINGS)
    made(place, kind="fixed", study=second, scope="comparison")
    before = content(place)

    correct_reading(place.database, place.keeper, first, 1, response="minutes", text="30.0", reason="misread", now=NOW)

    assert content(place) == before


def test_no_name_of_a_person_stands_in_what_a_reader_gets(place: Place) -> None:
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    made(place, kind="live", study=place.study_id)

    assert place.keeper.name not in content(place)
    assert place.keeper.address not in content(place)


def test_only_a_hash_of_the_token_is_kept(place: Place) -> None:
    made(place, kind="live", study=place.study_id)

    with place.database.read() as session:
        kept = session.scalars(select(ReaderLink.token_hash)).one()
        everything = str(session.execute(text("SELECT * FROM reader_link")).all())
    assert len(kept) == 64
    assert TOKEN not in everything


def test_a_revoked_an_expired_and_an_unknown_link_are_all_not_found(place: Place) -> None:
    link = made(place, kind="live", study=place.study_id)
    made(place, kind="live", study=place.study_id, days="7", token="week")
    assert read_link(place.database, "week", draw=draw, now=NOW + timedelta(days=6, hours=23)).kind == "live"
    revoke_link(place.database, place.keeper, place.series_id, link, now=NOW)

    for token, at in ((TOKEN, NOW), ("week", NOW + timedelta(days=7)), ("unknown", NOW)):
        with pytest.raises(NotFound, match="reader link: it does not open; ask whoever gave it to you for a new one"):
            read_link(place.database, token, draw=draw, now=at)


def test_links_are_listed_with_who_made_them_and_whether_they_open(place: Place) -> None:
    first = made(place, kind="fixed", study=place.study_id)
    made(place, kind="live", study=place.study_id, days="1", token="day")
    revoke_link(place.database, place.keeper, place.series_id, first, now=NOW)

    found = series_links(place.database, place.keeper, place.series_id, now=NOW + timedelta(days=2)).links

    assert [(link.kind, link.open, link.revoked_at is not None) for link in found] == [
        ("live", False, False),
        ("fixed", False, True),
    ]
    assert {link.made_by for link in found} == {place.keeper.name}
    assert {link.what for link in found} == {"Walk and start"}


@pytest.mark.parametrize(
    ("draft", "told"),
    [
        (LinkDraft("everything", 1, None, None, "fixed", ""), "what it shows: 'everything' given; choose study or"),
        (LinkDraft("study", 1, None, None, "for ever", ""), "kind: 'for ever' given; choose fixed or live"),
        (LinkDraft("study", 1, None, None, "live", "0"), "days: '0' given; give a whole number from 1 to 3660"),
        (LinkDraft("study", 1, None, None, "live", "soon"), "days: 'soon' given"),
    ],
)
def test_a_link_that_cannot_be_made_is_refused_with_what_could_be(place: Place, draft: LinkDraft, told: str) -> None:
    with pytest.raises(InputRefused, match=told):
        make_link(place.database, place.keeper, place.series_id, draft, token=TOKEN, draw=draw, now=NOW)


def test_a_link_shows_studies_of_its_own_series_only(place: Place) -> None:
    with pytest.raises(NotFound, match="there is no study 99 in this series"):
        propose_link(place.database, place.keeper, place.series_id, LinkDraft("study", 99, None, None, "live", ""))
    with pytest.raises(NotNow, match="it is running; only closed studies are compared"):
        made(place, kind="live", study=place.study_id, scope="comparison")


def test_a_viewer_may_neither_make_nor_list_nor_revoke_links(place: Place) -> None:
    link = made(place, kind="live", study=place.study_id)
    viewer = somebody_in(place.database, place.keeper, place.series_id, role="viewer")
    draft = LinkDraft("study", place.study_id, None, None, "live", "")

    with pytest.raises(NotAllowed, match="a viewer may read"):
        make_link(place.database, viewer, place.series_id, draft, token="x", draw=draw, now=NOW)
    with pytest.raises(NotAllowed, match="a viewer may read"):
        series_links(place.database, viewer, place.series_id, now=NOW)
    with pytest.raises(NotAllowed, match="a viewer may read"):
        revoke_link(place.database, viewer, place.series_id, link, now=NOW)
    with pytest.raises(NotFound, match="this series has no link 99"):
        revoke_link(place.database, place.keeper, place.series_id, 99, now=NOW)
