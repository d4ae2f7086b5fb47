"""What a reader link opens, and its JSON twin; nothing here changes anything in the record."""

from __future__ import annotations

from datetime import datetime

from flask import Blueprint, jsonify, url_for
from markupsafe import Markup
from werkzeug.wrappers import Response

from registry.services.reader_links import ReaderPage, read_link
from web import shell
from web.marks import public
from web.pages import render_page
from web.reader.drawings import draw
from web.reader.pages import ReaderComparisonPage, ReaderStudyPage


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("reader", __name__, template_folder="templates", url_prefix="/r")
    made.add_url_rule("/<token>", view_func=page)
    made.add_url_rule("/<token>/record.json", view_func=record)
    return made


@public
def page(token: str) -> Response:
    """Show what the link was made for."""
    found = _read(token)
    kind_of_page = ReaderComparisonPage if found.scope == "comparison" else ReaderStudyPage
    content = found.content
    return render_page(
        kind_of_page(
            kind=found.kind,
            as_of=datetime.fromisoformat(content["as_of"]),
            expires_at=found.expires_at,
            series=content["series"],
            record=content["record"],
            # Drawn by our own template when the record was made; every text in it was escaped there.
            drawings={name: Markup(drawing) for name, drawing in content["drawings"].items()},  # noqa: S704
            twin=url_for("reader.record", token=token),
        )
    )


@public
def record(token: str) -> Response:
    """Give the page's JSON twin."""
    return jsonify({name: part for name, part in _read(token).content.items() if name != "drawings"})


def _read(token: str) -> ReaderPage:
    return read_link(shell.database(), token, draw=draw, now=shell.now())
