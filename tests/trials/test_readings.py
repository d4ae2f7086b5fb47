"""A reading is kept exactly, or refused with the fix."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from registry.errors import OffGrid, ReadingRefused, UnitRefused
from registry.trials.readings import Step, nearest_steps, read_steps, steps_reader, write_steps
from registry.trials.units import UNITS, conversion, unit, units_of

TENTH = Step.parse("0.1")


@pytest.mark.parametrize(
    ("text", "steps"),
    [
        ("12.3", 123), ("12", 120), ("-0.4", -4), ("\N{MINUS SIGN}3.2", -32), (" 7.1 ", 71), ("1.23e1", 123),
        ("7.", 70), (".5", 5), ("+1", 10), ("12.30", 123),
    ],
)  # fmt: skip
def test_numbers_on_the_grid_are_read(text: str, steps: int) -> None:
    assert read_steps(text, TENTH) == steps


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("1e400", "'1e400' given; that is out of all range"),
        ("NaN", "'NaN' given; give a number in steps of 0.1"),
        ("Infinity", "'Infinity' given"),
        ("1,5", "'1,5' given; write a decimal point: 1.5"),
        ("7 min", "'7 min' given; give a number in steps of 0.1"),
        ("", "nothing given"),
        ("1_000", "'1_000' given"),
        ("\u0661", "given; give a number"),
        ("9" * 61, "given"),
    ],
)
def test_what_is_no_number_is_refused_with_the_fix(text: str, said: str) -> None:
    with pytest.raises(ReadingRefused) as refusal:
        read_steps(text, TENTH)

    assert said in str(refusal.value)


@pytest.mark.parametrize(
    ("text", "offered"), [("738.0000000000001", "738.0"), ("12.34", "12.3"), ("12.25", "12.3"), ("-12.25", "-12.3")]
)
def test_a_number_between_two_steps_is_offered_the_nearest(text: str, offered: str) -> None:
    with pytest.raises(OffGrid, match="lies between two steps of 0.1; give .*, or use a finer step") as refusal:
        read_steps(text, TENTH)

    assert refusal.value.offered == offered
    assert write_steps(nearest_steps(text, TENTH), TENTH) == offered


@pytest.mark.parametrize("text", ["0", "-0.1", "NaN", "1,5", "fine", "", "1e400"])
def test_a_step_must_be_a_number_above_zero(text: str) -> None:
    with pytest.raises(ReadingRefused, match="step: "):
        Step.parse(text)


@given(steps=st.integers(-(2**62), 2**62), size=st.sampled_from(["0.1", "0.05", "0.25", "1", "5", "1e-7", "100"]))
def test_what_is_written_is_read_back(steps: int, size: str) -> None:
    step = Step.parse(size)

    assert read_steps(write_steps(steps, step), step) == steps


@given(
    text=st.from_regex(r"-?[0-9]{0,4}\.?[0-9]{0,3}", fullmatch=True) | st.text(max_size=6),
    size=st.sampled_from(["0.1", "0.01", "1"]),
)
def test_the_quick_reader_takes_nothing_otherwise_than_the_careful_one(text: str, size: str) -> None:
    step = Step.parse(size)

    quick = steps_reader(step)(text)

    assert quick is None or quick == read_steps(text, step) == Decimal(text) / step.size


def test_units_convert_exactly_within_their_dimension_only() -> None:
    # BIPM, SI brochure, 9th edition: 1 h = 60 min = 3600 s; inch by the agreement of 1959: 25.4 mm.
    assert conversion(unit("h"), unit("min")) == 60
    assert conversion(unit("in"), unit("mm")) * 10 == 254
    assert {known.code for known in units_of("time")} == {"s", "ms", "min", "h", "d"}
    assert len({known.code for known in UNITS}) == len(UNITS)
    with pytest.raises(UnitRefused, match="minutes measure time, metres length"):
        conversion(unit("min"), unit("m"))
    with pytest.raises(UnitRefused, match="'fathom' given; choose one of s, ms"):
        unit("fathom")
