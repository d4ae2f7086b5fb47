"""Health of the service."""

from __future__ import annotations

from flask import Blueprint, Response, jsonify

from registry.services import upkeep
from web import shell
from web.marks import public


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("upkeep", __name__)
    made.add_url_rule("/healthz", view_func=healthz)
    return made


@public
def healthz() -> Response:
    """Say that the registry can serve, with which database and at which migration."""
    found = upkeep.health(shell.database())
    return jsonify(status="ok", database=found.database, migration=found.migration)
