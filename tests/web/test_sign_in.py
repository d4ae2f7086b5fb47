"""Nobody gets in without a sign-in, and a sign-in ends when it says."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta

import pytest
from flask import Flask
from hypothesis import given
from hypothesis import strategies as st

from registry.services.opening import Database
from tests.support.studies import NOW, PASSWORD, a_keeper
from tests.support.visitors import SETTINGS, Clock, a_visitor, an_app, words_of
from web.security.gate import own_path


def test_a_page_asked_for_without_a_sign_in_leads_to_the_form_and_back(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app)

    asked = visitor.get("/series/new")
    signed_in = visitor.sign_in("keeper@example.org", next_path="/series/new")

    assert (asked.status_code, asked.location) == (303, "/sign-in?next=/series/new")
    assert (signed_in.status_code, signed_in.location) == (303, "/series/new")
    assert visitor.get("/series/new").status_code == 200


def test_a_form_sent_without_a_sign_in_is_refused_and_not_led_away(app: Flask) -> None:
    response = a_visitor(app).post("/series/new", {"name": 'Pick "tours"'})

    assert response.status_code == 401
    assert "your sign-in has run out, and nothing was changed" in words_of(response)
    assert '<form method="post" action="/series/new">' in response.text
    assert '<input type="hidden" name="name" value="Pick &#34;tours&#34;" autocomplete="off">' in response.text


def test_a_program_without_a_sign_in_gets_problem_details(app: Flask) -> None:
    response = a_visitor(app).get("/", Accept="application/json")

    assert (response.status_code, response.mimetype) == (401, "application/problem+json")
    assert response.json is not None
    assert response.json["faults"][0]["accepted"].startswith("sign in again")


def test_a_wrong_password_and_an_unknown_address_read_the_same(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app)

    wrong = visitor.sign_in("keeper@example.org", "not the password")
    unknown = visitor.sign_in("nobody@example.org", "not the password")

    assert wrong.status_code == unknown.status_code == 401
    assert "this address and password do not belong together" in words_of(wrong)
    assert words_of(wrong) == words_of(unknown)


def test_a_refused_sign_in_keeps_the_address_and_never_shows_the_password(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)

    response = a_visitor(app).sign_in('o"brien@example.org', "my secret words")

    assert 'value="o&#34;brien@example.org"' in response.text
    assert "my secret words" not in response.text


def test_a_sign_in_runs_out(app: Flask, sqlite: Database, clock: Clock) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app, "keeper@example.org")

    clock.at = NOW + timedelta(hours=SETTINGS.session_hours, seconds=-1)
    before = visitor.get("/").status_code
    clock.at = NOW + timedelta(hours=SETTINGS.session_hours, seconds=1)
    after = visitor.get("/").status_code

    assert (before, after) == (200, 303)


def test_signing_out_ends_the_session_and_not_only_the_cookie(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app, "keeper@example.org")
    cookie = visitor.client.get_cookie("weftbook")
    assert cookie is not None

    response = visitor.post("/sign-out")
    visitor.client.set_cookie("weftbook", cookie.value)

    assert (response.status_code, response.location) == (303, "/sign-in")
    assert response.headers["Clear-Site-Data"] == '"cache"'
    assert visitor.get("/").status_code == 303


def test_a_form_left_open_can_be_sent_after_signing_in_again(app: Flask, sqlite: Database, clock: Clock) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app, "keeper@example.org")
    visitor.get("/series/new")
    mark_of_the_open_form = visitor.token
    clock.at = NOW + timedelta(hours=13)

    refused = visitor.post("/series/new", {"name": "Pick tours"})
    visitor.sign_in("keeper@example.org")
    visitor.token = mark_of_the_open_form
    accepted = visitor.post("/series/new", {"name": "Pick tours"})

    assert (refused.status_code, accepted.status_code) == (401, 303)


def test_somebody_signed_in_is_led_past_the_form(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)

    response = a_visitor(app, "keeper@example.org").get("/sign-in?next=/series/new")

    assert (response.status_code, response.location) == (303, "/series/new")


def test_a_registry_without_people_says_how_the_first_one_gets_in(app: Flask) -> None:
    assert "Nobody has an account in this registry yet" in words_of(a_visitor(app).get("/sign-in"))


def test_over_https_the_cookies_are_held_to_this_host_and_hidden_from_scripts(sqlite: Database) -> None:
    a_keeper(sqlite)
    app = an_app(sqlite, settings=replace(SETTINGS, secure_cookies=True))
    visitor = a_visitor(app, base="https://localhost")

    # Over https the form's mark is taken only from our own pages.
    visitor.get("/sign-in")
    response = visitor.post(
        "/sign-in",
        {"address": "keeper@example.org", "password": PASSWORD},
        Referer="https://localhost/sign-in",
    )

    assert response.status_code == 303
    (cookie,) = [text for text in response.headers.getlist("Set-Cookie") if text.startswith("__Host-weftbook=")]
    assert {"Secure", "HttpOnly", "Path=/", "SameSite=Lax"} <= set(cookie.split("; "))


@pytest.mark.parametrize(
    "foreign",
    [
        "https://elsewhere.example/",
        "//elsewhere.example/",
        "/\\elsewhere.example/",
        "\\\\elsewhere.example",
        "/\t/elsewhere.example/",
        "javascript:alert(1)",
        "http:/elsewhere.example",
        "studies",
        "",
        None,
    ],
)
def test_where_to_go_next_is_never_another_site(foreign: str | None) -> None:
    assert own_path(foreign) == "/"


@given(st.text(max_size=40))
def test_whatever_is_given_the_next_path_is_one_of_our_own(text: str) -> None:
    path = own_path(text)

    assert path[0] == "/"
    assert path[1:2] not in ("/", "\\")
    assert path.isprintable()
