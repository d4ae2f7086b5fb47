"""Whether a page or JSON was asked for."""

from __future__ import annotations

from flask import request


def wants_json() -> bool:
    """Whether the asker wants JSON: an address of the interface for programs, JSON sent, or JSON preferred."""
    if request.path.startswith("/api/") or request.is_json:
        return True
    best = request.accept_mimetypes.best_match(["text/html", "application/json", "application/problem+json"])
    return best is not None and best != "text/html"
