"""How large a request may be."""

from __future__ import annotations

from flask import Flask, current_app, request

from web.marks import largest_body

USUAL_BYTES = 2_000_000


def install(app: Flask) -> None:
    """Refuse larger requests than a view takes, before anything reads them."""
    app.config["MAX_CONTENT_LENGTH"] = USUAL_BYTES
    app.config["MAX_FORM_MEMORY_SIZE"] = USUAL_BYTES
    app.before_request(_widen)


def _widen() -> None:
    size = largest_body(current_app.view_functions.get(request.endpoint or ""))
    if size is not None:
        request.max_content_length = size
