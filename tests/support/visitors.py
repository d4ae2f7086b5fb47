"""Visitors of the pages: clients of one application, signed in through the form as people do."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from datetime import datetime
from html import unescape

from flask import Flask
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from registry.services.access import Role
from registry.services.opening import Database
from registry.services.people import Person, add_person, grant
from registry.services.settings import Settings
from tests.support.studies import CHEAP, NOW, PASSWORD
from web import create_app

SETTINGS = Settings(
    database_url="", secret="s" * 40, secure_cookies=False, session_hours=12, hashing=CHEAP, build="test"
)
_TOKEN = re.compile(r'name="csrf_token" value="([^"]+)"')


@dataclass
class Clock:
    """A clock that a test sets."""

    at: datetime = NOW

    def __call__(self) -> datetime:
        """Say the time it was set to."""
        return self.at


@dataclass
class Visitor:
    """Somebody at a browser."""

    client: FlaskClient
    token: str = field(default="", repr=False)

    def get(self, path: str, **headers: str) -> TestResponse:
        """Ask for a page."""
        return self._noted(self.client.get(path, headers=_named(headers), buffered=True))

    def post(self, path: str, fields: Mapping[str, object] | None = None, **headers: str) -> TestResponse:
        """Send a form with the mark of the site in it."""
        if not self.token:
            self.get("/sign-in")
        sent = {"csrf_token": self.token, **(fields or {})}
        return self._noted(self.client.post(path, data=sent, headers=_named(headers), buffered=True))

    def sign_in(self, address: str, password: str = PASSWORD, *, next_path: str = "/") -> TestResponse:
        """Send the sign-in form."""
        return self.post("/sign-in", {"address": address, "password": password, "next": next_path})

    def _noted(self, response: TestResponse) -> TestResponse:
        if response.mimetype == "text/html" and (found := _TOKEN.search(response.text)):
            self.token = unescape(found[1])
        return response


def _named(headers: Mapping[str, str]) -> dict[str, str]:
    return {name.replace("_", "-"): value for name, value in headers.items()}


def an_app(database: Database, *, settings: Settings = SETTINGS, clock: Callable[[], datetime] | None = None) -> Flask:
    """Make the application on a test's database, at a set time."""
    return create_app(database, settings, clock=clock or Clock())


def a_visitor(app: Flask, address: str = "", *, base: str = "http://localhost") -> Visitor:
    """Give somebody at a browser, signed in when an address is given."""
    client = app.test_client()
    client.environ_base["SERVER_NAME"] = "localhost"
    if base.startswith("https"):
        client.environ_base["wsgi.url_scheme"] = "https"
    visitor = Visitor(client)
    if address:
        response = visitor.sign_in(address)
        assert response.status_code == 303, response.text
    return visitor


def somebody(database: Database, address: str, *, keeper: bool = False) -> Person:
    """Add somebody without any role yet."""
    name = address.partition("@")[0].title()
    return add_person(database, name=name, address=address, password=PASSWORD, keeper=keeper, now=NOW, hashing=CHEAP)


def somebody_in(database: Database, by: Person, series_id: int, *, role: Role, address: str = "") -> Person:
    """Add somebody with a role in a series; unless given, the address starts with the role."""
    person = somebody(database, address or f"{role}@example.org")
    grant(database, by, series_id, address=person.address, role=role, now=NOW)
    return person


def words_of(response: TestResponse) -> str:
    """Give a page's text as people read it: tags taken out, entities resolved, white space folded."""
    text = re.sub(r"<(script|style)\b.*?</\1>", " ", response.text, flags=re.S)
    return " ".join(unescape(re.sub(r"<[^>]+>", " ", text)).split())
