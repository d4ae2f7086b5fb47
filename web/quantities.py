"""Quantities of an analysis as text: means, offsets, sums of squares, chances."""

from __future__ import annotations

from flask import Flask

from registry.services.figures import Figure
from web.numbers import minus

# Keeps thousands together on one line without a comma that could be read as a decimal point.
GROUP = "\u202f"


def install(app: Flask) -> None:
    """Give templates the filters ``fixed``, ``signed``, ``significant`` and ``chance``."""
    for each in (fixed, signed, significant, chance):
        app.add_template_filter(each)


def fixed(figure: Figure, places: int) -> str:
    """Write a quantity with so many digits behind the point."""
    return minus(f"{_known(figure):,.{places}f}".replace(",", GROUP))


def signed(figure: Figure, places: int) -> str:
    """Write an offset with its sign; what rounds to nothing has none."""
    text = f"{_known(figure):+,.{places}f}".replace(",", GROUP)
    return minus(text) if any(digit in text for digit in "123456789") else text[1:]


def significant(figure: Figure, digits: int = 5) -> str:
    """Write a quantity with so many digits that matter, plainly where that can be read."""
    value = _known(figure)
    size = abs(value)
    if size and not 1e-4 <= size < 1e9:
        return minus(f"{value:.{digits - 1}e}")
    before = len(str(int(size))) if size >= 1 else 1
    return minus(f"{value:,.{max(0, digits - before)}f}".replace(",", GROUP))


def chance(figure: Figure) -> str:
    """Write a p-value as a plain number."""
    value = _known(figure)
    return "< 0.0001" if value < 0.0001 else f"{value:.4f}"


def _known(figure: Figure) -> float:
    if figure.value is None:
        raise ValueError(f"a template must show the reason and not the number: {figure.reason}")
    return figure.value
