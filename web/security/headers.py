"""The headers that come with every answer."""

from __future__ import annotations

from flask import Flask, Response, request

from web import shell
from web.assets import keep_static_files

# The chart library sets style attributes on what it draws; everything else comes from our own files.
CONTENT_SECURITY_POLICY = "; ".join(
    (
        "default-src 'none'",
        "script-src 'self'",
        "connect-src 'self'",
        "style-src 'self'",
        "style-src-attr 'unsafe-inline'",
        "img-src 'self' data: blob:",
        "font-src 'self'",
        "manifest-src 'self'",
        "worker-src 'self'",
        "base-uri 'none'",
        "form-action 'self'",
        "frame-ancestors 'none'",
    )
)

ALWAYS = {
    "Content-Security-Policy": CONTENT_SECURITY_POLICY,
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "Referrer-Policy": "same-origin",
    "Permissions-Policy": "camera=(), geolocation=(), microphone=(), payment=(), usb=()",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
}
# Behind a reader link the address itself is the key: nobody it leads to, and no index, may learn it.
FOR_READERS = {"Referrer-Policy": "no-referrer", "X-Robots-Tag": "noindex, nofollow, noarchive"}
READERS = "/r/"
TWO_YEARS = 63_072_000


def install(app: Flask) -> None:
    """Set the headers on every answer, errors included."""
    app.after_request(_set_headers)


def _set_headers(response: Response) -> Response:
    response.headers.update(ALWAYS)
    if request.path.startswith(READERS):
        response.headers.update(FOR_READERS)
    if shell.settings().secure_cookies:
        response.headers["Strict-Transport-Security"] = f"max-age={TWO_YEARS}"
    keep_static_files(response)
    if "Cache-Control" not in response.headers:
        response.headers["Cache-Control"] = "private, no-store"
    return response
