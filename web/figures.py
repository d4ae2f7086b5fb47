"""Figures: a chart in plain data, its words, and never without the table that says the same."""

from __future__ import annotations

import html
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from flask import Flask
from markupsafe import Markup


@dataclass(frozen=True)
class Figure:
    """One chart; the page draws it, in the colours of the stylesheet, beside the table that says the same.

    ``name`` makes its id on the page (letters, digits, hyphens), ``caption`` stands under
    it, ``described_by`` is the id of the table that says the same. ``traces`` and
    ``layout`` are the chart library's own; a colour is given as ``var(--woad)``, and
    anything a person typed goes through ``plain``.
    """

    name: str
    caption: str
    described_by: str
    traces: Sequence[Mapping[str, Any]]
    layout: Mapping[str, Any]
    height: int = 360

    def content(self) -> Mapping[str, Any]:
        """Give what the drawing module reads."""
        return {"data": self.traces, "layout": {**self.layout, "height": self.height}}


def install(app: Flask) -> None:
    """Give templates the filter ``json_block``."""
    app.add_template_filter(json_block)


def plain(text: str) -> str:
    """Make something a person typed safe as a chart's text: the chart library reads tags in it."""
    return html.escape(text, quote=False)


def json_block(content: object) -> Markup:
    """Write JSON that can stand inside a data block of a page, whatever text is in it."""
    text = json.dumps(content, ensure_ascii=False, allow_nan=False)
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return Markup(text)  # noqa: S704 - every sign that could end the block was written as an escape just above.
