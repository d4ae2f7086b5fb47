"""Amounts of a response in words: to one digit more than its step."""

from __future__ import annotations

from registry.services.study_card import ResponseLine


def amount(value: float, response: ResponseLine) -> str:
    """Write a number to one digit more than the response's step, with a true minus sign."""
    return f"{value:.{places_of(response)}f}".replace("-", "\N{MINUS SIGN}")


def places_of(response: ResponseLine) -> int:
    """Say to how many digits behind the point numbers of a response are shown: one more than its step."""
    _, _, digits = response.step.partition(".")
    return min(len(digits) + 1, 12)


def unit_words(response: ResponseLine) -> str:
    """Say what an amount is counted in."""
    return "of 1" if response.kind == "yes_no" else response.unit
