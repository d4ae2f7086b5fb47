"""Readings between text and whole steps, exactly or not at all."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Context, Decimal, Inexact, InvalidOperation
from fractions import Fraction
from functools import cached_property

from registry.errors import Fault, OffGrid, ReadingRefused

# A number as people type it: sign, digits, point, and an exponent of at most three digits.
_NUMBER = re.compile(r"[+-]?(?:\d{1,60}(?:\.\d{0,60})?|\.\d{1,60})(?:[eE][+-]?\d{1,3})?", re.ASCII)
_DECIMAL_COMMA = re.compile(r"([+-]?\d+),(\d+)", re.ASCII)
_LARGEST_EXPONENT = 30
_SMALLEST_EXPONENT = -60
# Wide enough for every number that passes the checks above, so that nothing is ever rounded unasked.
_EXACT = Context(prec=400, traps=[InvalidOperation, Inexact])
_SHOWN = 40


@dataclass(frozen=True)
class Step:
    """The smallest unit a response is recorded to; every reading is a whole number of them."""

    size: Decimal

    @classmethod
    def parse(cls, text: str) -> Step:
        """Read a step such as 0.1, 0.05 or 5; refuses zero, less, and what is no plain number."""
        size = _number(text, what="step", accepted="give a step above 0, for example 0.1")
        if size <= 0:
            raise _refused("step", f"{_short(text)} given", "give a step above 0, for example 0.1")
        return cls(size.normalize(_EXACT))

    @cached_property
    def fraction(self) -> Fraction:
        """The step as an exact fraction."""
        return Fraction(self.size)

    @property
    def places(self) -> int:
        """How many digits stand behind the point in a reading."""
        exponent = self.size.as_tuple().exponent
        return max(0, -exponent) if isinstance(exponent, int) else 0

    def __str__(self) -> str:
        """Write the step in plain digits."""
        return f"{self.size:f}"


def read_steps(text: str, step: Step) -> int:
    """Read a number as whole steps; refuses anything else with the fix in the message.

    Raises OffGrid, which offers the nearest value, for a number between two steps, and
    ReadingRefused for what is no number that can be kept.
    """
    value = _number(text, what="reading", accepted=f"give a number in steps of {step}")
    steps = Fraction(value) / step.fraction
    if steps.denominator != 1:
        offered = write_steps(_nearest(steps), step)
        raise OffGrid(
            Fault(
                "reading",
                f"{_short(text)} lies between two steps of {step}",
                f"give {offered}, or use a finer step",
                "reading",
            ),
            offered=offered,
        )
    return steps.numerator


def steps_reader(step: Step) -> Callable[[str], int | None]:
    """Give a quick reader for plain decimals of a step that is a power of ten; None means: look closely.

    It exists because a file may hold a million distinct readings, and whole-number
    arithmetic on plain digits is several times quicker than decimals; what it takes, it
    takes exactly as read_steps does.
    """
    places = step.places
    if step.size != Decimal(1).scaleb(-places):
        return lambda text: None
    zeros = "0" * places

    def read(text: str) -> int | None:
        whole, _, digits = text.partition(".")
        if len(digits) > places or not whole.removeprefix("-").isdecimal() or not text.isascii() or len(whole) > 30:
            return None
        if digits and not digits.isdecimal():
            return None
        return int(whole + digits + zeros[len(digits) :])

    return read


def read_decimal(text: str) -> Decimal:
    """Read a number as an exact decimal, or refuse it as read_steps would."""
    return _number(text, what="reading", accepted="give a number")


def nearest_steps(text: str, step: Step) -> int:
    """Read a number as the nearest whole steps, half away from zero: for who rounds knowingly."""
    return _nearest(
        Fraction(_number(text, what="reading", accepted=f"give a number in steps of {step}")) / step.fraction
    )


def write_steps(steps: int, step: Step) -> str:
    """Write whole steps as a number in plain digits, as many behind the point as the step has."""
    return f"{_EXACT.multiply(Decimal(steps), step.size):.{step.places}f}"


def _nearest(steps: Fraction) -> int:
    """Round half away from zero, in whole numbers."""
    twice = 2 * abs(steps.numerator) + steps.denominator
    whole = twice // (2 * steps.denominator)
    return whole if steps >= 0 else -whole


def _number(text: str, *, what: str, accepted: str) -> Decimal:
    """Read plain decimal or exponent notation, bounded, as an exact decimal."""
    stripped = text.strip().replace("\N{MINUS SIGN}", "-")
    comma = _DECIMAL_COMMA.fullmatch(stripped)
    if comma:
        raise _refused(what, f"{_short(text)} given", f"write a decimal point: {comma[1]}.{comma[2]}")
    if not _NUMBER.fullmatch(stripped):
        given = f"{_short(text)} given" if stripped else "nothing given"
        raise _refused(what, given, accepted)
    value = Decimal(stripped)
    if value and not _SMALLEST_EXPONENT <= value.adjusted() <= _LARGEST_EXPONENT:
        raise _refused(what, f"{_short(text)} given", f"that is out of all range; {accepted}")
    return value


def _short(text: str) -> str:
    stripped = text.strip()
    return repr(stripped if len(stripped) <= _SHOWN else stripped[:_SHOWN] + "…")


def _refused(where: str, given: str, accepted: str) -> ReadingRefused:
    return ReadingRefused(Fault(where, given, accepted, where))
