"""Pages behind a reader link: open to anybody who has it, and changing nothing."""

from __future__ import annotations

import re
import sqlite3
from pathlib import Path

import pytest
from flask import Flask

from registry.services.opening import Database
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
from tests.support.visitors import Clock, Visitor, a_visitor, an_app, words_of

TWO_STUDIES = {
    "Winter": lambda levels: 20.0 + len(levels[0]) / 10,
    "Spring": lambda levels: 20.0 + len(levels[0]) / 5,
}


@pytest.fixture
def place(sqlite: Database) -> Place:
    made = a_study(sqlite)
    for title, mean in TWO_STUDIES.items():
        close_a_study(made, title=title, readings=even_readings((WALK.levels, START.levels), mean))
    return made


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def app(place: Place, clock: Clock) -> Flask:
    return an_app(place.database, clock=clock)


def link(app: Flask, place: Place, **fields: str) -> str:
    """Make a link as an analyst does; gives its path."""
    keeper = a_visitor(app, "keeper@example.org")
    sent = {"scope": "study", "study": "2", "beside": "", "response": "minutes", "kind": "fixed", "days": "30"} | fields
    response = keeper.post(f"/series/{place.series_id}/links/new", sent)
    assert response.status_code == 201, words_of(response)
    found = re.search(r'value="http://localhost(/r/[^"]+)"', response.text)
    assert found
    return found[1]


def test_a_link_opens_without_an_account_and_explains_itself(app: Flask, place: Place) -> None:
    path = link(app, place)

    words = words_of(a_visitor(app).get(path))

    assert "Winter" in words
    assert "This is a read-only page of Weftbook" in words
    assert "It is fixed: its numbers are those of 2 March 2026" in words
    assert "What this page does not show" in words
    assert "no names of people are shared" in words
    assert "No result justifies a pace that harms." in words
    assert "Kim Keeper" not in words
    assert "Sign out" not in words


def test_every_combination_stands_under_its_own_factors(app: Flask, place: Place) -> None:
    # Start sorts before walk by its letters, and after it in the study.
    text = a_visitor(app).get(link(app, place)).text

    heads = re.findall(r'<th scope="col">(\w+)</th>', text.partition("combinations-caption")[2])
    assert heads[:2] == ["walk", "start"]
    assert "<td>serpentine</td><td>front</td>" in text


def test_a_comparison_opens_with_both_studies_and_the_change(app: Flask, place: Place) -> None:
    path = link(app, place, scope="comparison", study="3", beside="2", kind="live")

    response = a_visitor(app).get(path)

    words = words_of(response)
    assert "What changed: Winter to Spring" in words
    assert "It is live" in words
    assert 'id="changes-figure"' in response.text
    twin = a_visitor(app).get(f"{path}/record.json").get_json()
    assert (twin["format"], twin["record"]["format"]) == ("weftbook.reader/1", "weftbook.comparison/1")


def test_a_reader_page_leaks_its_address_to_nobody(app: Flask, place: Place) -> None:
    visitor = a_visitor(app)
    for path in (link(app, place), "/r/unknown"):
        headers = visitor.get(path).headers
        assert headers["Referrer-Policy"] == "no-referrer"
        assert headers["X-Robots-Tag"] == "noindex, nofollow, noarchive"
        assert headers["Cache-Control"] == "private, no-store"


def test_a_fixed_page_stays_byte_identical_whatever_happens_later(app: Flask, place: Place) -> None:
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    paths = [link(app, place), link(app, place, study="1"), link(app, place, scope="comparison", study="3", beside="2")]
    addresses = [*paths, *(f"{path}/record.json" for path in paths)]
    before = [a_visitor(app).get(address).data for address in addresses]

    change_everything(place)

    assert [a_visitor(app).get(address).data for address in addresses] == before


def test_a_signed_in_reader_sees_the_same_page(app: Flask, place: Place) -> None:
    path = link(app, place)

    assert a_visitor(app, "keeper@example.org").get(path).text == a_visitor(app).get(path).text


def test_an_expired_and_a_revoked_link_answer_that_nothing_is_there(app: Flask, place: Place, clock: Clock) -> None:
    path = link(app, place, days="1")
    revoked = link(app, place)
    keeper = a_visitor(app, "keeper@example.org")
    keeper.post(f"/series/{place.series_id}/links/2/revoke")
    clock.at = NOW.replace(day=4)

    for each in (path, revoked, "/r/unknown"):
        for address in (each, f"{each}/record.json"):
            assert a_visitor(app).get(address).status_code == 404, address


def test_nothing_behind_a_link_changes_the_record_by_any_method(app: Flask, place: Place, tmp_path: Path) -> None:
    path = link(app, place)
    anybody, keeper = a_visitor(app), a_visitor(app, "keeper@example.org")
    before = _record(place.database)

    rules = [rule for rule in app.url_map.iter_rules() if rule.rule.startswith("/r/")]
    assert rules
    assert {method for rule in rules for method in rule.methods or ()} == {"GET", "HEAD", "OPTIONS"}
    for visitor in (anybody, keeper):
        for address in (path, f"{path}/record.json", "/r/unknown", f"{path}/anything"):
            for method in ("GET", "HEAD", "OPTIONS", "POST", "PUT", "PATCH", "DELETE"):
                visitor.client.open(address, method=method, buffered=True)

    assert _record(place.database) == before


def _record(database: Database) -> list[str]:
    path = str(database.engine.url.database)
    connection = sqlite3.connect(path)
    lines = list(connection.iterdump())
    connection.close()
    return lines


def test_a_hostile_name_is_shown_as_text_in_page_and_drawing(app: Flask, place: Place) -> None:
    from registry.services.levels import rename_level, series_levels

    level = series_levels(place.database, place.keeper, place.series_id).factors[0].levels[0]
    hostile = "<script>alert(1)</script>"
    rename_level(place.database, place.keeper, place.series_id, level.id, name=hostile, reason="to see", now=NOW)

    text = a_visitor(app).get(link(app, place)).text

    assert hostile not in text
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in text


def test_a_form_with_a_fault_keeps_what_was_typed(app: Flask, place: Place) -> None:
    keeper: Visitor = a_visitor(app, "keeper@example.org")

    response = keeper.post(
        f"/series/{place.series_id}/links/new", {"scope": "study", "study": "2", "kind": "fixed", "days": "soon"}
    )

    assert response.status_code == 422
    assert 'value="soon"' in response.text
    assert "give a whole number from 1 to 3660" in words_of(response)
