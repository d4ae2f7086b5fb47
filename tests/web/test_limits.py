"""How often somebody may try to sign in."""

from __future__ import annotations

from flask import Flask

from registry.services.opening import Database
from tests.support.studies import a_keeper
from tests.support.visitors import a_visitor, an_app, somebody, words_of


def test_ten_refused_tries_for_one_address_are_the_last_for_a_while(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app)

    tries = [visitor.sign_in("Keeper@example.org", "wrong").status_code for _ in range(10)]
    stopped = visitor.sign_in("keeper@example.org")

    assert tries == [401] * 10
    assert stopped.status_code == 429
    assert "Wait a quarter of an hour" in words_of(stopped)


def test_somebody_else_at_the_same_network_address_can_still_sign_in(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    somebody(sqlite, "lena@example.org")
    visitor = a_visitor(app)
    for _ in range(10):
        visitor.sign_in("keeper@example.org", "wrong")

    assert visitor.sign_in("lena@example.org").status_code == 303


def test_tries_from_one_place_for_many_addresses_are_stopped_too(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    visitor = a_visitor(app)
    for number in range(30):
        visitor.sign_in(f"guess{number}@example.org", "wrong")

    assert visitor.sign_in("keeper@example.org").status_code == 429


def test_signing_in_rightly_is_never_counted(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)

    assert [a_visitor(app).sign_in("keeper@example.org").status_code for _ in range(35)] == [303] * 35


def test_two_applications_count_apart(app: Flask, sqlite: Database) -> None:
    a_keeper(sqlite)
    for _ in range(10):
        a_visitor(app).sign_in("keeper@example.org", "wrong")

    assert a_visitor(an_app(sqlite)).sign_in("keeper@example.org").status_code == 303
