"""Errors as answers: a status for each, words for people, problem details for programs."""

from __future__ import annotations

import logging

import pytest
from flask import Blueprint, Flask

from registry import errors
from registry.errors import Fault, RegistryError
from registry.services import upkeep
from registry.services.opening import Database, open_registry
from tests.support.studies import a_keeper
from tests.support.visitors import Visitor, a_visitor, an_app, words_of
from web.marks import public, takes_up_to
from web.refusals import STATUS_OF


def classes_below(parent: type[RegistryError]) -> set[type[RegistryError]]:
    return {child for direct in parent.__subclasses__() for child in {direct, *classes_below(direct)}}


def raising(app: Flask, error: Exception) -> Visitor:
    """Add an address at which an error comes up."""
    made = Blueprint("raising", __name__)

    @public
    def view() -> str:
        raise error

    made.add_url_rule("/raising", view_func=view)
    app.register_blueprint(made)
    return a_visitor(app)


def test_every_error_class_has_a_status() -> None:
    assert set(STATUS_OF) == classes_below(RegistryError)
    assert {getattr(errors, name) for name in errors.__all__} - {Fault, RegistryError} == set(STATUS_OF)


@pytest.mark.parametrize("kind", sorted(STATUS_OF, key=str))
def test_an_error_is_told_as_a_page_and_as_problem_details(app: Flask, kind: type[RegistryError]) -> None:
    fault = Fault("line 7, column minutes", "'7,1' given", "write 7.1 with a point", "minutes")
    error = errors.OffGrid(fault, offered="7.1") if kind is errors.OffGrid else kind(fault)
    visitor = raising(app, error)

    page = visitor.get("/raising")
    problem = visitor.get("/raising", Accept="application/problem+json")

    assert page.status_code == problem.status_code == STATUS_OF[kind]
    assert (page.mimetype, problem.mimetype) == ("text/html", "application/problem+json")
    assert problem.json is not None
    assert problem.json["status"] == STATUS_OF[kind]
    if STATUS_OF[kind] == 500:
        assert "line 7" not in page.text + problem.text
        assert "The error was noted under" in words_of(page)
    else:
        assert "line 7, column minutes: '7,1' given; write 7.1 with a point" in words_of(page)
        assert problem.json["detail"] == "line 7, column minutes: '7,1' given; write 7.1 with a point"
        assert problem.json["faults"] == [
            {
                "where": "line 7, column minutes",
                "given": "'7,1' given",
                "accepted": "write 7.1 with a point",
                "field": "minutes",
            }
        ]


def test_an_unexpected_error_shows_its_id_and_never_its_text(app: Flask, caplog: pytest.LogCaptureFixture) -> None:
    visitor = raising(app, ValueError("the secret is out"))

    with caplog.at_level(logging.ERROR):
        page = visitor.get("/raising")
        problem = visitor.get("/raising", Accept="application/json")

    assert page.status_code == problem.status_code == 500
    assert "the secret is out" not in page.text + problem.text
    assert problem.json is not None
    assert f"error {problem.json['reference']} at GET /raising" in caplog.text
    assert "the secret is out" in caplog.text


def test_what_people_typed_is_never_markup_on_an_error_page(app: Flask) -> None:
    visitor = raising(app, errors.NotFound(Fault("study", "<script>alert(1)</script>", "choose another")))

    assert "<script>alert" not in visitor.get("/raising").text


def test_an_address_where_nothing_is_reads_the_same_for_everybody(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)

    pages = [a_visitor(app, address).get("/nothing/here") for address in ("", "keeper@example.org")]

    assert [page.status_code for page in pages] == [404, 404]
    assert all("Nothing is kept at this address, or it is not yours to see" in words_of(page) for page in pages)


def test_a_key_that_no_database_holds_is_not_found(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app, "keeper@example.org")

    for key in (2**63, 10**40, 0):
        assert visitor.get(f"/series/{key}/studies/new").status_code == 404
    assert visitor.get(f"/series/{2**63 - 1}/studies/new").status_code == 404


def test_a_method_that_an_address_does_not_take_is_named(app: Flask) -> None:
    response = a_visitor(app).post("/healthz")

    assert response.status_code == 405
    assert "GET" in response.headers["Allow"]


def test_a_form_without_the_mark_of_the_site_is_refused_in_words(app: Flask) -> None:
    response = app.test_client().post("/sign-in", data={"address": "kim@example.org"})

    assert response.status_code == 400
    assert "Nothing was changed. Go back, load the page again" in words_of(response)


def test_more_than_an_address_takes_is_refused_saying_how_much_it_takes(app: Flask) -> None:
    made = Blueprint("taking", __name__)

    @public
    @takes_up_to(5_000_000)
    def taking() -> str:
        return "taken"

    made.add_url_rule("/taking", view_func=taking, methods=["POST"])
    app.register_blueprint(made)
    visitor = a_visitor(app)

    usual = visitor.post("/sign-in", {"address": "x" * 2_000_000})
    refused = visitor.post("/taking", {"text": "x" * 5_000_000})

    assert (usual.status_code, refused.status_code) == (413, 413)
    assert "This address takes up to 2 MB. Nothing was changed." in words_of(usual)
    assert "This address takes up to 5 MB. Nothing was changed." in words_of(refused)


def test_a_registry_that_was_never_upgraded_says_what_to_do(tmp_path: object) -> None:
    database = open_registry(f"sqlite:///{tmp_path}/empty.db")
    visitor = a_visitor(an_app(database))

    health = visitor.get("/healthz", Accept="application/json")
    database.dispose()

    assert health.status_code == 503
    assert health.json is not None
    assert health.json["faults"][0]["accepted"] == "run `weftbook upgrade`"


def test_the_health_of_a_registry_names_its_database_and_migration(app: Flask, sqlite: Database) -> None:
    response = a_visitor(app).get("/healthz")

    assert response.status_code == 200
    assert response.json is not None
    assert response.json == {"status": "ok", "database": "sqlite", "migration": upkeep.health(sqlite).migration}
