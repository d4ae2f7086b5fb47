"""Forms keep names that people type out of the way of ids."""

from __future__ import annotations

import re

from hypothesis import given
from hypothesis import strategies as st

from registry.errors import Fault, InputRefused
from web.forms import Faults, field_id, lines_of


@given(st.text(max_size=30))
def test_the_id_of_a_field_holds_nothing_that_an_id_may_not(name: str) -> None:
    assert re.fullmatch(r"f-[A-Za-z0-9_-]*", field_id(name))


@given(st.text(max_size=12), st.text(max_size=12))
def test_two_names_never_share_an_id(one: str, other: str) -> None:
    assert (field_id(one) == field_id(other)) == (one == other)


def test_names_that_look_like_escapes_keep_their_own_ids() -> None:
    assert field_id("a b") == "f-a_20_b"
    assert field_id("a_20_b") == "f-a_5f_20_5f_b"


def test_levels_are_read_one_a_line_whatever_ends_the_lines() -> None:
    assert lines_of("serpentine\r\n largest gap \n\n\rreturn\n") == ("serpentine", "largest gap", "return")


def test_a_fault_stands_beside_its_own_field_alone() -> None:
    refusal = InputRefused(
        [Fault("name", "nothing given", "give a name", "name"), Fault("study", "it is closed", "choose another")]
    )

    faults = Faults.of(refusal)

    assert faults.beside("name") == ("nothing given: give a name",)
    assert faults.beside("about") == ()
    assert [str(fault) for fault in faults] == [
        "name: nothing given; give a name",
        "study: it is closed; choose another",
    ]
