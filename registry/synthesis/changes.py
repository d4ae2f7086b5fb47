"""What changed between two studies: the same contrasts on common ground, and the difference between them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations
from math import sqrt
from typing import Literal

from registry.analysis.distributions import t_quantile, t_two_sided
from registry.analysis.findings import judge
from registry.analysis.results import Estimate
from registry.analysis.undefined import Undefined
from registry.synthesis.common_ground import Caveat, ground_beside, shared_levels
from registry.synthesis.contributions import Contribution, Identity, coefficients, evidence

ChangeCode = Literal["changed", "same", "unsettled"]
WORDS: dict[ChangeCode, str] = {
    "changed": "changed",
    "same": "no change that matters",
    "unsettled": "not settled",
}
ApartCode = Literal[
    "held_in_one", "held_apart", "block_in_one", "absent_in_one", "one_level_shared", "no_level_shared", "level_in_one"
]
ENDED_OTHERWISE = Undefined("one of the two did not end at its planned size, so an ordinary interval promises too much")
_CODES: dict[str, ChangeCode] = {"act": "changed", "real": "changed", "small": "same", "unsettled": "unsettled"}


@dataclass(frozen=True)
class Change:
    """One contrast in both studies, and the second less the first; ``p`` belongs to the change alone."""

    corners: Mapping[Identity, tuple[Identity, Identity]]
    first: Estimate
    second: Estimate
    change: Estimate
    p: float | Undefined
    code: ChangeCode | Undefined
    caveats: tuple[Caveat, ...]


@dataclass(frozen=True)
class Apart:
    """A factor, or a level of one, that cannot be set side by side, and why; () for a study that lacks the factor."""

    code: ApartCode
    factor: Identity
    first: tuple[Identity, ...]
    second: tuple[Identity, ...]


@dataclass(frozen=True)
class Compared:
    """Two studies on common ground: differences between levels first, then 2 × 2 interaction contrasts."""

    differences: tuple[Change, ...]
    interactions: tuple[Change, ...]
    apart: tuple[Apart, ...]
    common: Mapping[Identity, tuple[Identity, ...]]


def compare(first: Contribution, second: Contribution, *, margin: float | None, confidence: float = 0.95) -> Compared:
    """Say what changed from one study to another, contrast by contrast.

    Only levels both studies crossed enter; the change's interval is adjusted (Sidak 1967)
    for all changes of its term, and judged by the margin. The studies must not share
    trials. Sources: Welch 1947 Biometrika 34:28-35 for the standard error and freedom of
    a difference; Gelman & Stern 2006 Am. Stat. 60:328-331 for judging the change itself.
    """
    common: dict[Identity, tuple[Identity, ...]] = {}
    apart: list[Apart] = []
    for factor in dict.fromkeys(part.factor for study in (first, second) for part in study.parts):
        found = _common_levels(first, second, factor)
        if isinstance(found, Apart):
            apart.append(found)
        elif found:
            common[factor] = found
            apart.extend(_left_over(first, second, factor, found))
    differences = [
        change
        for factor, levels in common.items()
        for change in _changes(first, second, [{factor: pair} for pair in combinations(levels, 2)], margin, confidence)
    ]
    interactions = [
        change
        for one, other in combinations(common, 2)
        for change in _changes(first, second, list(_squares(one, other, common)), margin, confidence)
    ]
    return Compared(tuple(differences), tuple(interactions), tuple(apart), common)


def _squares(
    one: Identity, other: Identity, common: Mapping[Identity, tuple[Identity, ...]]
) -> Iterator[dict[Identity, tuple[Identity, Identity]]]:
    for pair in combinations(common[one], 2):
        for beside in combinations(common[other], 2):
            yield {one: pair, other: beside}


def _common_levels(first: Contribution, second: Contribution, factor: Identity) -> tuple[Identity, ...] | Apart:
    """Give the levels both studies crossed; () where neither did and nothing stands apart."""
    one, other = first.part(factor), second.part(factor)
    levels = (one.levels if one else (), other.levels if other else ())
    roles = {part.role for part in (one, other) if part is not None}
    if "treatment" not in roles:
        apart = roles == {"held"} and one is not None and other is not None and one.levels != other.levels
        return Apart("held_apart", factor, *levels) if apart else ()
    if one is None or other is None:
        return Apart("absent_in_one", factor, *levels)
    if "block" in roles:
        return Apart("block_in_one", factor, *levels)
    if "held" in roles:
        return Apart("held_in_one", factor, *levels)
    shared = shared_levels(levels)
    if len(shared) < 2:
        return Apart("one_level_shared" if shared else "no_level_shared", factor, *levels)
    return shared


def _left_over(
    first: Contribution, second: Contribution, factor: Identity, shared: tuple[Identity, ...]
) -> Iterator[Apart]:
    """List the levels of a shared factor that only one study has."""
    one, other = (
        tuple(level for level in part.levels if level not in shared)
        for part in (first.part(factor), second.part(factor))
        if part is not None
    )
    if one or other:
        yield Apart("level_in_one", factor, one, other)


def _changes(
    first: Contribution,
    second: Contribution,
    term: list[dict[Identity, tuple[Identity, Identity]]],
    margin: float | None,
    confidence: float,
) -> Iterator[Change]:
    """Set every contrast of one term side by side, each interval adjusted for all of them."""
    for corners in term:
        ground = ground_beside((first, second), list(corners))
        one, other = (
            evidence(study, *coefficients(study, corners, ground.over[study.key]), margin=margin)
            for study in (first, second)
        )
        silent = next((found.estimate.lower for found in (one, other) if not found.counts), None)
        change = change_between(one.estimate, other.estimate, confidence=confidence ** (1 / len(term)))
        if isinstance(silent, Undefined) or "full" not in {first.standing} & {second.standing}:
            reason = silent if isinstance(silent, Undefined) else ENDED_OTHERWISE
            change = Estimate(change.estimate, change.se, change.df, reason, reason)
        finding = judge(change.estimate, change.lower, change.upper, margin=margin)
        code = finding.code if isinstance(finding.code, Undefined) else _CODES[finding.code]
        yield Change(corners, one.estimate, other.estimate, change, _p(change), code, ground.caveats)


def change_between(first: Estimate, second: Estimate, *, confidence: float = 0.95) -> Estimate:
    """Give second less first with its Welch-Satterthwaite standard error, freedom and interval."""
    numbers = (first.estimate, second.estimate, first.se, second.se, first.df, second.df)
    value, other, se1, se2, df1, df2 = numbers
    if (
        isinstance(value, Undefined) or isinstance(other, Undefined) or isinstance(se1, Undefined)
        or isinstance(se2, Undefined) or isinstance(df1, Undefined) or isinstance(df2, Undefined)
    ):  # fmt: skip
        reason = next(number for number in numbers if isinstance(number, Undefined))
        known = not isinstance(value, Undefined) and not isinstance(other, Undefined)
        return Estimate(other - value if known else reason, reason, reason, reason, reason)  # type: ignore[operator]
    se = sqrt(se1**2 + se2**2)
    df = se**4 / (se1**4 / df1 + se2**4 / df2)
    reach = t_quantile((1 + confidence) / 2, df) * se
    return Estimate(other - value, se, df, other - value - reach, other - value + reach)


def _p(change: Estimate) -> float | Undefined:
    value, se, df, lower = change.estimate, change.se, change.df, change.lower
    if isinstance(value, Undefined) or isinstance(se, Undefined) or isinstance(df, Undefined):
        return next(number for number in (value, se, df) if isinstance(number, Undefined))
    return lower if isinstance(lower, Undefined) else t_two_sided(value / se, df)
