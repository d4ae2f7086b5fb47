"""Home, a new series, a new study."""

from __future__ import annotations

import re
from collections.abc import Mapping
from html import unescape

import pytest
from flask import Flask
from markupsafe import escape

from registry.services.opening import Database
from registry.services.series_pages import SeriesDraft, new_series
from registry.services.study_card import study_card
from registry.services.study_plan import close_study
from tests.support.studies import NOW, SHIFT, START, WALK, a_keeper, a_study, another_study
from tests.support.visitors import Visitor, a_visitor, somebody, somebody_in, words_of

# Names that trip what splices text: markup, quotes, separators, names of a language's own things, length.
NASTY = (
    "C",
    "Q",
    "id",
    "select",
    "__proto__",
    "constructor",
    'the "long" aisle',
    "o'clock, late; <b>&amp;</b>",
    "{{ 7 * 7 }}",
    "🧵 walk",
    "w" * 200,
)


def a_form(**changes: str) -> dict[str, str]:
    """Give a form that is accepted as it stands."""
    return {
        "do": "make",
        "title": "Walk and start",
        "question": "Which walk is fastest?",
        "site": "Osierholm",
        "time_zone": "Europe/Copenhagen",
        "factors-0-name": "walk",
        "factors-0-role": "treatment",
        "factors-0-levels": "serpentine\r\nlargest gap\r\nreturn",
        "factors-1-name": "start",
        "factors-1-role": "treatment",
        "factors-1-levels": "front\r\nback",
        "responses-0-name": "minutes",
        "responses-0-about": "minutes per tour",
        "responses-0-unit": "min",
        "responses-0-step": "0.1",
        "responses-0-margin": "0.8",
        "responses-0-wanted": "lower",
        "responses-0-kind": "measured",
        "responses-0-part": "primary",
    } | {name.replace("__", "-"): value for name, value in changes.items()}


def typed(page: str) -> Mapping[str, str]:
    """Read back what the fields of the study form hold."""
    found = {
        unescape(name): unescape(value)
        for name, value in re.findall(r'<input id="[^"]*" name="([^"]*)" type="text" value="([^"]*)"', page)
    }
    areas = re.findall(r'<textarea id="[^"]*" name="([^"]*)"[^>]*>\n(.*?)</textarea>', page, flags=re.S)
    found |= {unescape(name): unescape(value) for name, value in areas}
    for name, options in re.findall(r'<select id="[^"]*" name="([^"]*)".*?>(.*?)</select>', page, flags=re.S):
        chosen = re.findall(r'<option value="([^"]*)" selected>', options)
        found[unescape(name)] = unescape(chosen[0]) if chosen else ""
    return found


@pytest.fixture
def keeper(app: Flask, sqlite: Database) -> Visitor:
    a_keeper(sqlite)
    return a_visitor(app, "keeper@example.org")


@pytest.fixture
def series(sqlite: Database) -> int:
    place = a_keeper(sqlite, address="founder@example.org")
    return new_series(sqlite, place, SeriesDraft("Pick tours", "How tours are walked"), now=NOW)


def test_an_empty_home_says_what_to_do(keeper: Visitor) -> None:
    text = words_of(keeper.get("/"))

    assert "There is no series here for you yet." in text
    assert "Start one, then plan its first study." in text
    assert "New series" in text


def test_somebody_without_a_role_is_told_whom_to_ask(app: Flask, sqlite: Database) -> None:
    somebody(sqlite, "lena@example.org")

    text = words_of(a_visitor(app, "lena@example.org").get("/"))

    assert "Ask a keeper of the series you work on to give you a role in it" in text
    assert "New series" not in text


def test_a_series_is_started_and_offers_its_first_study(keeper: Visitor) -> None:
    response = keeper.post("/series/new", {"name": "Pick tours", "about": "How tours are walked"})

    assert (response.status_code, response.location) == (303, "/#series-1")
    text = words_of(keeper.get("/"))
    assert "The series Pick tours was started. Its first study comes next." in text
    assert "No study yet. Say what the first one crosses" in text
    assert "was started" not in words_of(keeper.get("/"))


def test_a_refused_series_keeps_what_was_typed_beside_what_was_wrong(keeper: Visitor) -> None:
    response = keeper.post("/series/new", {"name": "  ", "about": "Tours & <walks>"})

    assert response.status_code == 422
    assert "Tours &amp; &lt;walks&gt;</textarea>" in response.text
    assert '<a href="#f-name">' in response.text
    assert 'aria-describedby="f-name-hint f-name-fault" aria-invalid="true"' in response.text
    assert "autofocus" in response.text.partition('class="fault-summary"')[2].partition(">")[0]


def test_a_series_name_that_is_taken_is_a_conflict_beside_the_field(keeper: Visitor, series: int) -> None:
    response = keeper.post("/series/new", {"name": "Pick tours"})

    assert response.status_code == 409
    assert "there is a series 'Pick tours' already: add a study to it, or choose another name" in words_of(response)
    assert typed(response.text)["name"] == "Pick tours"


def test_a_study_is_made_as_typed(keeper: Visitor, sqlite: Database, series: int) -> None:
    response = keeper.post(f"/series/{series}/studies/new", a_form())

    assert response.status_code == 303
    card = study_card(sqlite, a_person(sqlite), int(response.location.rpartition("/")[2]))
    assert (card.title, card.site, card.status, card.cells) == ("Walk and start", "Osierholm", "planned", 6)
    assert [(factor.name, factor.levels) for factor in card.factors] == [
        ("walk", ("serpentine", "largest gap", "return")),
        ("start", ("front", "back")),
    ]
    assert [(line.name, line.unit, line.step, line.margin) for line in card.responses] == [
        ("minutes", "min", "0.1", "0.8")
    ]


def a_person(database: Database):  # type: ignore[no-untyped-def]
    return a_keeper(database, address="reader@example.org")


@pytest.mark.parametrize("name", NASTY)
def test_any_name_is_kept_when_something_else_is_refused_and_taken_when_not(
    keeper: Visitor, sqlite: Database, series: int, name: str
) -> None:
    fields = a_form(
        title=name,
        site=name,
        factors__0__name=name,
        factors__1__levels=f"{name}\r\nback",
        responses__0__name=name,
        responses__0__step="0",
    )

    refused = keeper.post(f"/series/{series}/studies/new", fields)
    accepted = keeper.post(f"/series/{series}/studies/new", fields | {"responses-0-step": "0.1"})

    assert refused.status_code == 422
    kept = typed(refused.text)
    assert {kept[field] for field in ("title", "site", "factors-0-name", "responses-0-name")} == {name}
    assert kept["factors-1-levels"] == f"{name}\r\nback"
    assert accepted.status_code == 303
    card = study_card(sqlite, a_person(sqlite), int(accepted.location.rpartition("/")[2]))
    assert (card.title, card.factors[0].name, card.factors[1].levels[0], card.responses[0].name) == (name,) * 4
    assert str(escape(name)) in keeper.get("/").text


def test_every_fault_stands_on_top_and_leads_to_its_field(keeper: Visitor, series: int) -> None:
    fields = a_form(title="", time_zone="Mars/Base", factors__0__levels="serpentine", responses__0__step="a bit")

    page = keeper.post(f"/series/{series}/studies/new", fields).text

    summary = page.partition('class="fault-summary"')[2].partition("</div>")[0]
    targets = re.findall(r'href="#([^"]+)"', summary)
    assert targets == ["f-title", "f-time_5f_zone", "f-factors-0-levels", "f-responses-0-step"]
    for target in targets:
        assert page.count(f'id="{target}"') == 1
        assert f"{target}-fault" in page


def test_faults_of_the_whole_list_lead_to_the_list(keeper: Visitor, series: int) -> None:
    fields = a_form(factors__0__role="block", factors__1__role="block")

    page = keeper.post(f"/series/{series}/studies/new", fields).text

    assert '<a href="#f-factors">' in page
    assert page.count('id="f-factors"') == 1
    assert "2 blocks given: give at most one" in unescape(page)


def test_rows_left_blank_count_for_nothing_and_faults_name_the_rows_that_stay(keeper: Visitor, series: int) -> None:
    fields = a_form(factors__0__name="", factors__0__levels=" \r\n ", factors__1__levels="front")

    response = keeper.post(f"/series/{series}/studies/new", fields)

    assert response.status_code == 422
    kept = typed(response.text)
    assert kept["factors-0-name"] == "start"
    assert "factors-1-name" not in kept
    assert 'id="f-factors-0-levels-fault"' in response.text


def test_another_factor_is_added_with_everything_kept_and_the_focus_in_it(keeper: Visitor, series: int) -> None:
    fields = a_form(do="add-factor", factors__0__levels="half\r\n\r\n typed")

    response = keeper.post(f"/series/{series}/studies/new", fields)

    kept = typed(response.text)
    assert response.status_code == 200
    assert {name: kept[name] for name in fields if name not in ("do", "csrf_token")} == {
        name: value for name, value in fields.items() if name != "do"
    }
    assert (kept["factors-2-name"], kept["factors-2-role"]) == ("", "treatment")
    assert re.findall(r'<input id="([^"]+)"[^>]* autofocus', response.text) == ["f-factors-2-name"]


def test_a_row_is_removed_and_the_others_close_up(keeper: Visitor, series: int) -> None:
    response = keeper.post(f"/series/{series}/studies/new", a_form(do="remove-factor-0"))

    kept = typed(response.text)
    assert kept["factors-0-name"] == "start"
    assert "factors-1-name" not in kept


def test_a_response_is_added_as_a_guard_and_the_last_one_leaves_a_blank_row(keeper: Visitor, series: int) -> None:
    added = typed(keeper.post(f"/series/{series}/studies/new", a_form(do="add-response")).text)
    removed = typed(keeper.post(f"/series/{series}/studies/new", a_form(do="remove-response-0")).text)

    assert (added["responses-1-name"], added["responses-1-part"]) == ("", "guard")
    assert (removed["responses-0-name"], removed["responses-0-unit"]) == ("", "")


@pytest.mark.parametrize("button", ["remove-factor-99", "remove-factor-", "add-factor-x", "drop", ""])
def test_an_odd_button_never_fails(keeper: Visitor, series: int, button: str) -> None:
    fields = a_form(do=button, title="")

    assert keeper.post(f"/series/{series}/studies/new", fields).status_code in (200, 422)


def test_more_rows_than_a_study_could_use_are_refused(keeper: Visitor, series: int) -> None:
    fields = {f"factors-{place}-name": "walk" for place in range(41)}

    response = keeper.post(f"/series/{series}/studies/new", fields)

    assert response.status_code == 422
    assert "more than 40 sent; send at most 40" in words_of(response)


def test_a_yes_or_no_needs_neither_unit_nor_step(keeper: Visitor, sqlite: Database, series: int) -> None:
    fields = a_form(responses__0__kind="yes_no", responses__0__unit="", responses__0__step="")

    response = keeper.post(f"/series/{series}/studies/new", fields)

    assert response.status_code == 303


def test_what_the_series_knows_is_offered(app: Flask, sqlite: Database) -> None:
    place = a_study(sqlite)

    page = a_visitor(app, "keeper@example.org").get(f"/series/{place.series_id}/studies/new").text

    assert '<option value="walk" data-levels="serpentine\nlargest gap\nreturn">' in page
    assert '<option value="minutes" data-about="minutes per tour" data-kind="measured" data-unit="min"' in page
    assert typed(page)["site"] == "Osierholm"
    assert typed(page)["time_zone"] == "Europe/Copenhagen"


def test_a_study_is_filled_in_from_an_earlier_one(app: Flask, sqlite: Database) -> None:
    place = a_study(sqlite, factors=(WALK, START, SHIFT))

    page = a_visitor(app, "keeper@example.org").get(f"/series/{place.series_id}/studies/new?like={place.study_id}").text

    kept = typed(page)
    assert [kept[f"factors-{row}-name"] for row in range(3)] == ["walk", "start", "shift"]
    assert kept["factors-2-role"] == "block"
    assert kept["factors-0-levels"] == "serpentine\nlargest gap\nreturn"
    assert (kept["title"], kept["responses-0-margin"]) == ("", "0.8")


def test_a_study_of_another_series_fills_nothing_in(app: Flask, sqlite: Database) -> None:
    place = a_study(sqlite)
    other = new_series(sqlite, place.keeper, SeriesDraft("Packing", ""), now=NOW)

    page = a_visitor(app, "keeper@example.org").get(f"/series/{other}/studies/new?like={place.study_id}").text

    assert typed(page)["factors-0-name"] == ""


def test_home_shows_each_series_as_a_row_of_studies_in_time(app: Flask, sqlite: Database) -> None:
    place = a_study(sqlite, started=True)
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    close_study(sqlite, place.keeper, place.study_id, reason="early", note="enough seen", now=NOW)
    another_study(sqlite, place.keeper, place.series_id, title="Second", started=True)
    another_study(sqlite, place.keeper, place.series_id, title="Third", started=False)

    response = a_visitor(app, "keeper@example.org").get("/")

    text = words_of(response)
    assert "1 study is running." in text
    assert text.index("Walk and start") < text.index("Second") < text.index("Third")
    assert "closed early 1 trial logged Osierholm · last trial 2 March 2026" in text
    assert "running no trial yet" in text
    assert "Log trials of Second" in text
    assert "Plan and start Third" in text


def test_a_viewer_sees_the_row_without_what_only_others_may_do(app: Flask, sqlite: Database) -> None:
    place = a_study(sqlite)
    somebody_in(sqlite, place.keeper, place.series_id, role="viewer")

    visitor = a_visitor(app, "viewer@example.org")

    text = words_of(visitor.get("/"))
    assert "Walk and start" in text
    assert "Log trials" not in text
    assert "New study" not in text
    refused = visitor.get(f"/series/{place.series_id}/studies/new")
    assert refused.status_code == 403
    assert "ask a keeper of the series to make you analyst" in words_of(refused)
