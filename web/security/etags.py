"""Private ETags: a page that has not changed for this viewer is not made again."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Sequence

from flask import g, request, session
from werkzeug.wrappers import Response

from web import shell


def with_etag(make: Callable[[], Response], *, parts: Sequence[object]) -> Response:
    """Answer "not changed" when the browser has this very page, else make it.

    ``parts`` name all that the page shows: the viewer's role in the series, and the
    revision of every study on it. The build, who is signed in and the mark of their
    forms are added here.
    """
    etag = _etag(parts)
    if not session.get("_flashes") and request.if_none_match.contains_weak(etag):
        return _private(Response(status=304), etag)
    response = make()
    if response.status_code != 200 or g.get("told_something", False):
        return response  # A page that says something once must not be kept.
    return _private(response, etag)


def _private(response: Response, etag: str) -> Response:
    response.set_etag(etag, weak=True)
    response.headers["Cache-Control"] = "private, no-cache"
    return response


def _etag(parts: Sequence[object]) -> str:
    viewer = shell.visitor()
    shown = [shell.settings().build, viewer.id if viewer else None, session.get("csrf_token"), *map(repr, parts)]
    return hashlib.sha256(json.dumps(shown).encode()).hexdigest()[:32]
