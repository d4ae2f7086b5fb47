"""Intervals on one shared scale, a strip a line, drawn as plain vector graphics that need no script."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import ceil, floor, log10
from typing import Literal

from registry.services.figures import Interval
from web.numbers import minus

Shape = Literal["ring", "dot", "diamond", "bar"]
LANE = 20
_MOST_TICKS = 5


@dataclass(frozen=True)
class Reading:
    """One interval to draw: its numbers, the shape of its mark, and a short label at the left of its lane."""

    value: Interval
    shape: Shape
    label: str = ""
    faint: bool = False


@dataclass(frozen=True)
class Mark:
    """One interval as drawn: per cent of the width from the left, pixels from the top of its strip."""

    shape: Shape
    label: str
    faint: bool
    y: int
    at: str
    low: str
    high: str


@dataclass(frozen=True)
class Strip:
    """One line of a chart: its name above, its marks on lanes below each other."""

    name: str
    height: int
    marks: tuple[Mark, ...]


@dataclass(frozen=True)
class Tick:
    """One number on the scale; the outermost ones lean inwards so that they are not cut off."""

    at: str
    words: str
    anchor: Literal["start", "middle", "end"]


@dataclass(frozen=True)
class StripChart:
    """Intervals on one scale; ``band`` is where a difference is too small to matter, when a margin was stated."""

    name: str
    caption: str
    described_by: str
    unit: str
    strips: tuple[Strip, ...]
    ticks: tuple[Tick, ...]
    zero: str
    band: tuple[str, str] | None
    key: tuple[tuple[Shape, str], ...]


@dataclass(frozen=True)
class _Scale:
    low: float
    high: float
    step: float

    def place(self, value: float) -> str:
        """Give a place as per cent of the width, with room at both ends."""
        share = (value - self.low) / (self.high - self.low)
        return f"{4 + 92 * share:.2f}%"


def strip_chart(
    lines: Sequence[tuple[str, Sequence[Reading]]],
    *,
    name: str,
    caption: str,
    described_by: str,
    unit: str,
    margin: float | None,
    key: tuple[tuple[Shape, str], ...],
) -> StripChart | None:
    """Draw some lines of intervals on one scale that holds them all, and 0; nothing when none has a number."""
    known = [(text, [each for each in readings if each.value.value.value is not None]) for text, readings in lines]
    known = [(text, readings) for text, readings in known if readings]
    if not known:
        return None
    scale = _scale([number for _, readings in known for each in readings for number in _numbers(each)], margin)
    band = (scale.place(-margin), scale.place(margin)) if margin is not None else None
    return StripChart(
        name=name,
        caption=caption,
        described_by=described_by,
        unit=unit,
        strips=tuple(Strip(text, LANE * len(readings) + 8, tuple(_marks(readings, scale))) for text, readings in known),
        ticks=tuple(_ticks(scale)),
        zero=scale.place(0.0),
        band=band,
        key=key,
    )


def _numbers(reading: Reading) -> Iterator[float]:
    for figure in (reading.value.value, reading.value.lower, reading.value.upper):
        if figure.value is not None:
            yield figure.value


def _scale(numbers: Sequence[float], margin: float | None) -> _Scale:
    """Choose round ends that hold every number, 0 and the margin."""
    around = [*numbers, 0.0, *((-margin, margin) if margin is not None else ())]
    low, high = min(around), max(around)
    if low == high:
        low, high = low - 1, high + 1
    rough = (high - low) / _MOST_TICKS
    power = 10.0 ** floor(log10(rough))
    step = next(power * size for size in (1, 2, 5, 10) if power * size >= rough)
    return _Scale(floor(low / step) * step, ceil(high / step) * step, step)


def _ticks(scale: _Scale) -> Iterator[Tick]:
    count = round((scale.high - scale.low) / scale.step)
    places = max(0, -floor(log10(scale.step)))
    for at in range(count + 1):
        value = scale.low + at * scale.step
        words = minus(f"{value:.{places}f}") if round(value / scale.step) else "0"
        yield Tick(scale.place(value), words, "start" if at == 0 else "end" if at == count else "middle")


def _marks(readings: Sequence[Reading], scale: _Scale) -> Iterator[Mark]:
    for lane, each in enumerate(readings):
        value, lower, upper = (figure.value for figure in (each.value.value, each.value.lower, each.value.upper))
        at = scale.place(value if value is not None else 0.0)
        yield Mark(
            shape=each.shape,
            label=each.label,
            faint=each.faint,
            y=4 + LANE // 2 + LANE * lane,
            at=at,
            low=at if lower is None else scale.place(lower),
            high=at if upper is None else scale.place(upper),
        )
