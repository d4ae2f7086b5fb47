"""Our own static files and the chart script, each under an address that changes with its content."""

from __future__ import annotations

import gzip
import hashlib
import re
from functools import cache
from importlib.metadata import distribution
from pathlib import Path

from flask import Flask, Response, abort, request, send_file, url_for

from web.marks import public

FOR_EVER = "public, max-age=31536000, immutable"
_OWN_STYLE = re.compile(r'document\.getElementById\("([0-9a-f]{64})"\)')
CHART_SCRIPT = "plotly/package_data/plotly.min.js"


def install(app: Flask) -> None:
    """Serve the chart script, and give templates ``asset`` and ``chart_script``."""
    app.add_url_rule("/static/plotly-<version>.min.js", "chart_script", chart_script)
    app.add_template_global(asset)
    app.add_template_global(chart_script_address)
    app.add_template_global(chart_style_ids)


def asset(name: str) -> str:
    """Give the address of one of our static files, with a mark of its content so that it may be kept for ever."""
    folder = Path(__file__).parent / "static"
    return url_for("static", filename=name, v=_mark(folder / name, (folder / name).stat().st_mtime_ns))


@cache
def _mark(path: Path, _changed_at: int) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()[:12]


def keep_static_files(response: Response) -> None:
    """Let browsers keep a static file for ever when the address carries its mark, else ask each time."""
    if request.endpoint == "static" and response.status_code in (200, 304):
        kept = "v" in request.args and request.full_path == asset((request.view_args or {})["filename"])
        response.headers["Cache-Control"] = FOR_EVER if kept else "public, no-cache"


def chart_script_address() -> str:
    """Give the address of the chart script."""
    return url_for("chart_script", version=distribution("plotly").version)


@cache
def chart_style_ids() -> tuple[str, ...]:
    """Give the ids of style elements that the chart script adds by itself unless the page has them.

    They hold the looks of its maps, which no page of ours draws, and the content security
    policy refuses them; an element with the same id keeps the script from trying.
    """
    script = _chart_script_path().read_text(encoding="utf-8")
    return tuple(dict.fromkeys(_OWN_STYLE.findall(script)))


@public
def chart_script(version: str) -> Response:
    """Serve the script that stands in the chart library's own package, compressed when the browser takes it."""
    if version != distribution("plotly").version:
        abort(404)
    if request.accept_encodings.quality("gzip") > 0:
        response = Response(_compressed(), mimetype="text/javascript")
        response.headers["Content-Encoding"] = "gzip"
    else:
        response = send_file(_chart_script_path(), mimetype="text/javascript", conditional=False)
    response.headers["Vary"] = "Accept-Encoding"
    response.headers["Cache-Control"] = FOR_EVER
    return response


def _chart_script_path() -> Path:
    # Found without importing the library, which would cost the first visitor half a second.
    return Path(str(distribution("plotly").locate_file(CHART_SCRIPT)))


@cache
def _compressed() -> bytes:
    return gzip.compress(_chart_script_path().read_bytes(), mtime=0)
