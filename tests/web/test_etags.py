"""A page that has not changed for this viewer is not made again."""

from __future__ import annotations

from dataclasses import replace

import pytest
from flask import Blueprint, Flask, Response, flash

from registry.services.opening import Database
from tests.support.studies import a_keeper
from tests.support.visitors import SETTINGS, Visitor, a_visitor, an_app, somebody
from web.refusals import answer
from web.security.etags import with_etag


class Report:
    """A page whose revision a test sets, and that counts how often it was made."""

    def __init__(self) -> None:
        self.revision = 1
        self.made = 0
        self.status = 200

    def view(self) -> Response:
        """Answer with the page, or that it has not changed."""
        return with_etag(self._make, parts=["viewer", self.revision])

    def _make(self) -> Response:
        self.made += 1
        response = answer(self.status) if self.status != 200 else Response(f"revision {self.revision}")
        return Response(response.get_data(), response.status_code, mimetype="text/html")


def showing(app: Flask, report: Report) -> None:
    made = Blueprint("report", __name__)
    made.add_url_rule("/report", view_func=report.view)
    made.add_url_rule("/told", view_func=_told)
    app.register_blueprint(made)


def _told() -> str:
    flash("The reading was corrected.")
    return ""


@pytest.fixture
def report(app: Flask, sqlite: Database) -> Report:
    made = Report()
    showing(app, made)
    a_keeper(sqlite)
    return made


@pytest.fixture
def keeper(app: Flask, report: Report) -> Visitor:
    visitor = a_visitor(app, "keeper@example.org")
    visitor.get("/")  # The mark of the forms is made with the first page that holds a form.
    return visitor


def again(visitor: Visitor) -> tuple[int, int]:
    """Ask for the page, then once more with what the browser keeps; gives both statuses."""
    first = visitor.get("/report")
    return first.status_code, visitor.get("/report", If_None_Match=first.headers.get("ETag", "")).status_code


def test_a_page_seen_before_is_not_made_again(keeper: Visitor, report: Report) -> None:
    assert again(keeper) == (200, 304)
    assert report.made == 1


def test_a_page_is_kept_by_its_viewer_alone_and_asked_for_each_time(keeper: Visitor) -> None:
    assert keeper.get("/report").headers["Cache-Control"] == "private, no-cache"


def test_a_new_revision_is_shown(keeper: Visitor, report: Report) -> None:
    etag = keeper.get("/report").headers["ETag"]
    report.revision = 2

    response = keeper.get("/report", If_None_Match=etag)

    assert (response.status_code, response.text) == (200, "revision 2")


def test_two_people_never_share_a_page(app: Flask, sqlite: Database, keeper: Visitor) -> None:
    somebody(sqlite, "lena@example.org")
    etag = keeper.get("/report").headers["ETag"]

    assert a_visitor(app, "lena@example.org").get("/report", If_None_Match=etag).status_code == 200


def test_a_page_kept_before_signing_out_is_made_again(keeper: Visitor) -> None:
    # Its forms carry a mark that no longer holds.
    etag = keeper.get("/report").headers["ETag"]
    keeper.post("/sign-out")
    keeper.token = ""
    keeper.sign_in("keeper@example.org")

    assert keeper.get("/report", If_None_Match=etag).status_code == 200


def test_another_build_makes_every_page_again(sqlite: Database, keeper: Visitor) -> None:
    etag = keeper.get("/report").headers["ETag"]
    app = an_app(sqlite, settings=replace(SETTINGS, build="next"))
    showing(app, Report())
    cookies = {name: keeper.client.get_cookie(name) for name in ("weftbook", "weftbook-forms")}
    client = app.test_client()
    for name, cookie in cookies.items():
        assert cookie is not None
        client.set_cookie(name, cookie.value)

    assert client.get("/report", headers={"If-None-Match": etag}).status_code == 200


def test_what_is_said_once_is_not_lost_to_a_kept_page(keeper: Visitor) -> None:
    etag = keeper.get("/report").headers["ETag"]
    keeper.get("/told")

    assert keeper.get("/report", If_None_Match=etag).status_code == 200


def test_an_error_is_never_kept(keeper: Visitor, report: Report) -> None:
    report.status = 409

    assert "ETag" not in keeper.get("/report").headers
