"""What every view reaches: the registry, the settings, the clock, and who is signed in."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime

from flask import current_app, g

from registry.errors import Fault, SignInRefused
from registry.services.opening import Database
from registry.services.people import Person
from registry.services.settings import Settings


@dataclass(frozen=True)
class Shell:
    """What one application was made with."""

    database: Database
    settings: Settings
    clock: Callable[[], datetime]


def _shell() -> Shell:
    shell = current_app.extensions["weftbook"]
    assert isinstance(shell, Shell)  # noqa: S101 - create_app put it there; this tells the type checker.
    return shell


def database() -> Database:
    """Give the registry that this application serves."""
    return _shell().database


def settings() -> Settings:
    """Give the settings that this application was made with."""
    return _shell().settings


def now() -> datetime:
    """Say what time it is, in UTC."""
    return _shell().clock()


def person() -> Person:
    """Give who is signed in; only for pages that ask for it, as all do unless they say otherwise."""
    found = visitor()
    if found is None:
        raise SignInRefused(Fault("sign-in", "nobody is signed in", "sign in first"))
    return found


def visitor() -> Person | None:
    """Give who is signed in, or nobody."""
    found = g.get("person")
    return found if isinstance(found, Person) else None
