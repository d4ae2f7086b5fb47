"""Columns of numbers stand under each other."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from web.numbers import aligned, minus


def test_points_stand_under_each_other() -> None:
    assert aligned(["7.31", "-8", "10.5"]) == ("7.31", "\u22128\u2008\u2007\u2007", "10.5\u2007")


def test_whole_numbers_need_no_padding() -> None:
    assert aligned(["1", "12", "123"]) == ("1", "12", "123")


def test_only_a_leading_hyphen_is_a_minus_sign() -> None:
    assert (minus("-0.4"), minus("0.4"), minus("2-3")) == ("\u22120.4", "0.4", "2-3")


@given(st.lists(st.decimals(allow_nan=False, allow_infinity=False, places=3).map(str), max_size=5))
def test_every_entry_is_as_long_behind_the_point_as_the_longest(texts: list[str]) -> None:
    behind = {len(text.partition(".")[2]) for text in aligned(texts) if "." in text}

    assert len(behind) <= 1
