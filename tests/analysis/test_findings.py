"""A finding says no more than its interval against the margin."""

from __future__ import annotations

import pytest

from registry.analysis.findings import judge
from registry.analysis.undefined import Undefined


@pytest.mark.parametrize(
    ("lower", "upper", "margin", "code", "sign"),
    [
        (0.9, 1.7, 0.8, "act", 1),
        (-1.7, -0.9, 0.8, "act", -1),
        (0.1, 1.7, 0.8, "real", 1),
        (0.1, 0.7, 0.8, "small", 1),
        (-0.7, 0.7, 0.8, "small", 0),
        (-0.7, 0.8, 0.8, "unsettled", 0),
        (0.8, 1.7, 0.8, "real", 1),
        (0.9, 1.7, None, "real", 1),
        (-0.1, 0.1, None, "unsettled", 0),
    ],
)
def test_the_word_follows_from_the_interval_and_the_margin(
    lower: float, upper: float, margin: float | None, code: str, sign: int
) -> None:
    finding = judge((lower + upper) / 2, lower, upper, margin=margin)

    assert (finding.code, finding.sign) == (code, sign)


def test_without_an_interval_there_is_a_reason_and_no_word() -> None:
    reason = Undefined("it averages over a combination without trials")

    finding = judge(reason, reason, reason, margin=0.8)

    assert finding.code == reason
    assert finding.words == "it averages over a combination without trials"
