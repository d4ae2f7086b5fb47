"""Tallies add, remove, merge, rebase and rescale exactly, in any order."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from registry.trials.tallies import EMPTY, LIMB, Tally, from_limbs, to_limbs

distances = st.lists(st.integers(-(2**36), 2**36), max_size=30)


def tallied(values: list[int]) -> Tally:
    tally = EMPTY
    for value in values:
        tally = tally.add(value)
    return tally


@given(values=distances)
def test_a_tally_counts_what_python_counts(values: list[int]) -> None:
    assert tallied(values) == Tally(len(values), sum(values), sum(value * value for value in values))


@given(values=distances, others=distances)
def test_merging_and_taking_out_are_exact_in_any_order(values: list[int], others: list[int]) -> None:
    whole = tallied(values).merge(tallied(others))

    assert whole == tallied(others + values)
    assert whole.less(tallied(others)) == tallied(values)
    for value in values:
        whole = whole.remove(value)
    assert whole == tallied(others)


@given(values=distances, shift=st.integers(-(2**40), 2**40), factor=st.integers(1, 1000))
def test_another_anchor_and_a_finer_step_tell_the_same_readings(values: list[int], shift: int, factor: int) -> None:
    assert tallied(values).rebased(shift) == tallied([value - shift for value in values])
    assert tallied(values).rescaled(factor) == tallied([value * factor for value in values])


@given(squares=st.integers(-(2**99), 2**99))
def test_limbs_are_canonical_and_put_together_again(squares: int) -> None:
    high, low = to_limbs(squares)

    assert 0 <= low < LIMB
    assert from_limbs(high, low) == squares
