"""What comes with every answer."""

from __future__ import annotations

from dataclasses import replace

import pytest
from flask import Flask

from registry.services.opening import Database
from tests.support.studies import a_keeper
from tests.support.visitors import SETTINGS, a_visitor, an_app


@pytest.mark.parametrize("path", ["/", "/sign-in", "/healthz", "/nothing/here", "/static/weft.css", "/static/none.css"])
def test_every_answer_carries_the_content_policy_and_its_companions(app: Flask, path: str) -> None:
    headers = a_visitor(app).get(path).headers

    policy = dict(part.split(" ", 1) for part in headers["Content-Security-Policy"].split("; "))
    assert policy["default-src"] == "'none'"
    assert policy["script-src"] == policy["style-src"] == policy["connect-src"] == policy["form-action"] == "'self'"
    assert policy["frame-ancestors"] == policy["base-uri"] == "'none'"
    assert "unsafe-eval" not in headers["Content-Security-Policy"]
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert headers["Referrer-Policy"] == "same-origin"
    assert "camera=()" in headers["Permissions-Policy"]
    assert "Strict-Transport-Security" not in headers


def test_browsers_are_told_to_stay_with_https_where_it_is_used(sqlite: Database) -> None:
    app = an_app(sqlite, settings=replace(SETTINGS, secure_cookies=True))

    assert a_visitor(app).get("/healthz").headers["Strict-Transport-Security"] == "max-age=63072000"


def test_a_page_is_kept_in_no_cache(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)

    assert a_visitor(app, "keeper@example.org").get("/").headers["Cache-Control"] == "private, no-store"


def test_a_proxy_is_believed_only_when_the_setting_says_so(sqlite: Database) -> None:
    a_keeper(sqlite)

    def last_try(proxies: int) -> int:
        app = an_app(sqlite, settings=replace(SETTINGS, proxies=proxies))
        for number in range(30):
            a_visitor(app).sign_in(f"guess{number}@example.org", "wrong")
        visitor = a_visitor(app)
        visitor.get("/sign-in")
        fields = {"address": "keeper@example.org", "password": "wrong"}
        return visitor.post("/sign-in", fields, X_Forwarded_For="203.0.113.7").status_code

    assert (last_try(0), last_try(1)) == (429, 401)
