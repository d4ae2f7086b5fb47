"""The order in which every request is checked."""

from __future__ import annotations

from flask import Flask
from flask_wtf.csrf import CSRFProtect

from web import shell
from web.security import bodies, gate, headers, limits


def install(app: Flask) -> None:
    """Check every request: how large, then whether a form is our own, then who asks and how often."""
    with app.app_context():
        secure = shell.settings().secure_cookies
    app.config.update(
        SESSION_COOKIE_NAME="__Host-weftbook-forms" if secure else "weftbook-forms",
        SESSION_COOKIE_HTTPONLY=True,
        SESSION_COOKIE_SAMESITE="Lax",
        SESSION_COOKIE_SECURE=secure,
        SESSION_COOKIE_PATH="/",
        # A form may stay open for a whole shift: its mark holds as long as the browser's session does.
        WTF_CSRF_TIME_LIMIT=None,
    )
    bodies.install(app)
    CSRFProtect(app)
    gate.install(app)
    limits.install(app)
    headers.install(app)
