"""The gate: every page asks for a sign-in, unless its view is marked public."""

from __future__ import annotations

from urllib.parse import urlsplit

from flask import Flask, current_app, g, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from registry.errors import Fault, SignInRefused
from registry.services.people import person_of_session
from web import shell
from web.marks import is_public
from web.security.sessions import token_of_request
from web.wanted import wants_json


def install(app: Flask) -> None:
    """Find who asks, and turn away whoever did not sign in."""
    app.before_request(_admit)


def _admit() -> AnyResponse | None:
    endpoint = request.endpoint
    if endpoint is None or endpoint == "static":
        return None  # Nothing stands at this address, or a file that is the same for everybody.
    token = token_of_request()
    g.person = person_of_session(shell.database(), token, now=shell.now()) if token else None
    if g.person is not None or is_public(current_app.view_functions[endpoint]):
        return None
    return _turn_away()


def _turn_away() -> AnyResponse:
    if request.method in ("GET", "HEAD") and not wants_json():
        return redirect(url_for("people.sign_in_form", next=own_path(request.full_path.rstrip("?"))), 303)
    raise SignInRefused(
        Fault(
            "sign-in",
            "your sign-in has run out, and nothing was changed",
            "sign in again in another window, then come back here and send it once more",
        )
    )


def own_path(text: str | None) -> str:
    r"""Take over where to go next only when it is a path of our own; else Studies.

    A browser reads a backslash as a slash and skips tabs and line ends, so that /\\other.example
    would leave the site; only printable paths that start with one slash are taken.
    """
    given = text or ""
    parts = urlsplit(given) if given.isprintable() and "\\" not in given else None
    if parts is None or parts.scheme or parts.netloc or not given.startswith("/") or given.startswith("//"):
        return "/"
    return given
