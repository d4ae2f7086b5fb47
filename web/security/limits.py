"""How often somebody may try to sign in."""

from __future__ import annotations

from typing import Any

from flask import Flask, Response, request
from flask_limiter import Limiter
from flask_limiter.util import get_remote_address

# Only refused tries count, so that a whole shift may sign in from one address of the network.
TRIES_BY_CLIENT = "30 per 15 minutes"
TRIES_BY_ADDRESS = "10 per 15 minutes"
GUARDED = "people.sign_in_try"


def install(app: Flask) -> None:
    """Count refused tries by where they come from and by whom they are for, in this process's memory."""
    limiter = Limiter(get_remote_address, app=app, storage_uri="memory://", headers_enabled=False)
    view: Any = app.view_functions[GUARDED]
    by_client = limiter.limit(TRIES_BY_CLIENT, deduct_when=_was_refused)
    by_address = limiter.limit(TRIES_BY_ADDRESS, key_func=_address_tried, deduct_when=_was_refused)
    app.view_functions[GUARDED] = by_address(by_client(view))


def _was_refused(response: Response) -> bool:
    return response.status_code == 401


def _address_tried() -> str:
    return request.form.get("address", "").strip().lower()
