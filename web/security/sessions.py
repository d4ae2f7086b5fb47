"""The cookie that carries a signed-in session; the registry keeps only its hash."""

from __future__ import annotations

from flask import request
from flask.sessions import SessionMixin
from werkzeug.wrappers import Response

from registry.services.people import SignedIn
from web import shell


def cookie_name() -> str:
    """Name the cookie; the prefix makes browsers hold it to this very host over https."""
    return "__Host-weftbook" if shell.settings().secure_cookies else "weftbook"


def token_of_request() -> str:
    """Give the session token that came with a request, or nothing."""
    return request.cookies.get(cookie_name(), "")


def remember(response: Response, signed_in: SignedIn) -> None:
    """Hand the session to the browser."""
    response.set_cookie(
        cookie_name(),
        signed_in.token,
        expires=signed_in.expires,
        path="/",
        secure=shell.settings().secure_cookies,
        httponly=True,
        samesite="Lax",
    )


def forget(response: Response, forms: SessionMixin) -> None:
    """Take the session from the browser, the marks of open forms and every kept page with it."""
    forms.clear()
    response.delete_cookie(
        cookie_name(), path="/", secure=shell.settings().secure_cookies, httponly=True, samesite="Lax"
    )
    response.headers["Clear-Site-Data"] = '"cache"'
