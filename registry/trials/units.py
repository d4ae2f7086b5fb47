"""A small exact table of units, each a dimension and a fraction."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from registry.errors import Fault, UnitRefused


@dataclass(frozen=True)
class Unit:
    """A unit of a dimension; ``factor`` says how many base units of the dimension it is, exactly."""

    code: str
    name: str
    dimension: str
    factor: Fraction


# Factors: International System of Units (BIPM, SI brochure, 9th edition); inch, foot and pound by
# the international yard and pound agreement of 1959. Money and counts have no conversion between kinds.
UNITS: tuple[Unit, ...] = (
    Unit("s", "seconds", "time", Fraction(1)),
    Unit("ms", "milliseconds", "time", Fraction(1, 1000)),
    Unit("min", "minutes", "time", Fraction(60)),
    Unit("h", "hours", "time", Fraction(3600)),
    Unit("d", "days", "time", Fraction(86400)),
    Unit("m", "metres", "length", Fraction(1)),
    Unit("mm", "millimetres", "length", Fraction(1, 1000)),
    Unit("cm", "centimetres", "length", Fraction(1, 100)),
    Unit("km", "kilometres", "length", Fraction(1000)),
    Unit("in", "inches", "length", Fraction(254, 10000)),
    Unit("ft", "feet", "length", Fraction(3048, 10000)),
    Unit("g", "grams", "mass", Fraction(1)),
    Unit("kg", "kilograms", "mass", Fraction(1000)),
    Unit("t", "tonnes", "mass", Fraction(1_000_000)),
    Unit("lb", "pounds", "mass", Fraction(45359237, 100000)),
    Unit("count", "count", "count", Fraction(1)),
    Unit("eur", "euro", "money (EUR)", Fraction(1)),
    Unit("dkk", "Danish kroner", "money (DKK)", Fraction(1)),
    Unit("usd", "US dollars", "money (USD)", Fraction(1)),
    Unit("gbp", "pounds sterling", "money (GBP)", Fraction(1)),
    Unit("min_per", "minutes each", "time each", Fraction(60)),
    Unit("s_per", "seconds each", "time each", Fraction(1)),
    Unit("percent", "percent", "share", Fraction(1, 100)),
    Unit("points", "points", "points", Fraction(1)),
    Unit("unit", "no unit", "none", Fraction(1)),
)


def unit(code: str) -> Unit:
    """Find a unit by its code, or refuse saying which there are."""
    for known in UNITS:
        if known.code == code:
            return known
    codes = ", ".join(known.code for known in UNITS)
    raise UnitRefused(Fault("unit", f"{code!r} given", f"choose one of {codes}", "unit"))


def units_of(dimension: str) -> tuple[Unit, ...]:
    """List the units that measure the same thing."""
    return tuple(known for known in UNITS if known.dimension == dimension)


def conversion(given: Unit, wanted: Unit) -> Fraction:
    """Say by what a number in one unit is multiplied to be in another, exactly.

    Differences, standard errors and readings scale alike: no unit here has an offset.
    Raises UnitRefused when the two measure different things.
    """
    if given.dimension != wanted.dimension:
        raise UnitRefused(
            Fault(
                "unit",
                f"{given.name} measure {given.dimension}, {wanted.name} {wanted.dimension}",
                "compare only what measures the same",
                "unit",
            )
        )
    return given.factor / wanted.factor
