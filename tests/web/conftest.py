"""An application on a test's registry, and people at browsers."""

from __future__ import annotations

import pytest
from flask import Flask

from registry.services.opening import Database
from tests.support.visitors import Clock, an_app


@pytest.fixture
def clock() -> Clock:
    """Give the clock of the application."""
    return Clock()


@pytest.fixture
def app(sqlite: Database, clock: Clock) -> Flask:
    """Give an application on a migrated, empty registry."""
    return an_app(sqlite, clock=clock)
