"""Numbers as columns of text: points under each other, and a true minus sign."""

from __future__ import annotations

from collections.abc import Sequence

from flask import Flask

# As wide as a digit where figures are tabular; the point's own width is made up for by its own space.
DIGIT_SPACE = "\u2007"
POINT_SPACE = "\u2008"


def install(app: Flask) -> None:
    """Give templates the filters ``minus`` and ``aligned``."""
    app.add_template_filter(minus)
    app.add_template_filter(aligned)


def minus(text: str) -> str:
    """Write a negative number with the minus sign in place of the hyphen."""
    return f"\u2212{text[1:]}" if text.startswith("-") else text


def aligned(texts: Sequence[str]) -> tuple[str, ...]:
    """Pad numbers on the right so that, set flush right, their points stand under each other."""
    places = [len(text.partition(".")[2]) for text in texts]
    most = max(places, default=0)
    return tuple(minus(text) + _padding(own, most) for text, own in zip(texts, places, strict=True))


def _padding(own: int, most: int) -> str:
    point = POINT_SPACE if own == 0 and most > 0 else ""
    return point + DIGIT_SPACE * (most - own)
