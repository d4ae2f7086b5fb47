"""Which interactions are seen again: every 2 × 2 interaction contrast of a series, judged over its studies."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

from registry.analysis.undefined import Undefined
from registry.synthesis.common_ground import (
    Caveat,
    Ground,
    factors_in_order,
    ground_beside,
    has_corners,
    ran_corners,
)
from registry.synthesis.contributions import Contribution, Evidence, Identity, coefficients, evidence
from registry.synthesis.partial_conjunction import at_least, count_shown, discovery_adjusted
from registry.synthesis.pooling import Pooled, pool

VerdictCode = Literal["seen_again", "once", "opposite", "small", "single", "unsettled"]
ALPHA = 0.05
NONE_TO_POOL = Undefined("fewer than two studies can be pooled")


@dataclass(frozen=True)
class Shown:
    """One study's part in a recurrence."""

    study: Identity
    title: str
    evidence: Evidence


@dataclass(frozen=True)
class Counts:
    """In how many studies, at least, an interaction is above 0, below 0, or within the margin."""

    up: int
    down: int
    nil: int


@dataclass(frozen=True)
class Recurrence:
    """One interaction contrast over the studies that can speak to it.

    ``corners`` gives (first, second) level of both factors; an estimate is the difference
    second - first of the first factor at the second level of the second, less the same at
    its first level. ``r_value`` is the smallest false discovery rate over the board at
    which "at least two studies show it" is claimed, ``r_value_one`` the same for one.
    ``small_in_each`` says whether every study by itself shows it within the margin;
    ``silent`` names those that cross the corners and still cannot estimate it.
    """

    corners: Mapping[Identity, tuple[Identity, Identity]]
    each: tuple[Shown, ...]
    counts: Counts
    r_value: float | Undefined
    r_value_one: float | Undefined
    pooled: Pooled | Undefined
    verdict: VerdictCode
    small_in_each: bool
    agree_in_sign: bool
    caveats: tuple[Caveat, ...]
    silent: tuple[str, ...]


@dataclass(frozen=True)
class Omitted:
    """A contrast that no study can estimate: none has all four corners, or only with empty combinations."""

    corners: Mapping[Identity, tuple[Identity, Identity]]
    crossed: bool


@dataclass(frozen=True)
class Board:
    """Every interaction contrast of some studies, and those that none can estimate."""

    recurrences: tuple[Recurrence, ...]
    omitted: tuple[Omitted, ...]


@dataclass(frozen=True)
class _Gathered:
    """A contrast with its evidence, before the family is known."""

    corners: Mapping[Identity, tuple[Identity, Identity]]
    each: tuple[Shown, ...]
    counts: Counts
    pooled: Pooled | Undefined
    caveats: tuple[Caveat, ...]
    silent: tuple[str, ...]


def board(studies: Sequence[Contribution], *, margin: float, fdr: float = 0.05) -> Board:
    """Say of every 2 × 2 interaction contrast in how many studies it is seen, and what that amounts to.

    ``studies`` are closed and in order of time, their effects in one unit, and independent
    of each other; ``margin`` is the smallest change of a difference that matters, in that
    unit. Ground is common per contrast: the studies that hold all four corners, other
    factors averaged over the levels common to those. Sources: Benjamini & Heller 2008
    Biometrics 64:1215-1222 (counts); Heller, Bogomolov & Benjamini 2014 PNAS
    111:16262-16267 (r-values); the order of the verdicts is our own.
    """
    gathered: list[_Gathered] = []
    omitted: list[Omitted] = []
    for corners in every_square(studies):
        crossing = [study for study in studies if has_corners(study, corners)]
        # A study that never ran a corner cannot speak, and must not narrow the ground of those that can.
        holding = [study for study in crossing if ran_corners(study, corners)]
        ground = ground_beside(holding, list(corners))
        each = tuple(_shown(holding, corners, ground, margin))
        if each:
            heard = {shown.study for shown in each}
            silent = tuple(study.title for study in crossing if study.key not in heard)
            gathered.append(_gather(corners, each, ground, silent))
        else:
            omitted.append(Omitted(corners, crossed=bool(crossing)))
    return Board(tuple(_judged(gathered, margin=margin, fdr=fdr)), tuple(omitted))


def every_square(studies: Sequence[Contribution]) -> Iterator[dict[Identity, tuple[Identity, Identity]]]:
    """List every pair of levels of every pair of factors that some study crosses, in order of first appearance."""
    crossed: dict[Identity, set[Identity]] = {}
    for study in studies:
        for part in study.crossed:
            crossed.setdefault(part.factor, set()).update(part.levels)
    # A level that one study held and another crosses takes the place of its first appearance.
    levels = {
        factor: [level for level in _in_order(studies, factor) if level in crossed[factor]]
        for factor in factors_in_order(studies)
        if factor in crossed
    }
    for one, other in combinations(levels, 2):
        for pair in combinations(levels[one], 2):
            for beside in combinations(levels[other], 2):
                yield {one: pair, other: beside}


def _in_order(studies: Sequence[Contribution], factor: Identity) -> list[Identity]:
    parts = (part for study in studies for part in study.parts if part.factor == factor)
    return list(dict.fromkeys(level for part in parts for level in part.levels))


def _shown(
    crossing: Sequence[Contribution],
    corners: Mapping[Identity, tuple[Identity, Identity]],
    ground: Ground,
    margin: float,
) -> Iterator[Shown]:
    for study in crossing:
        found = evidence(study, *coefficients(study, corners, ground.over[study.key]), margin=margin)
        if not isinstance(found.estimate.se, Undefined):
            yield Shown(study.key, study.title, found)


def _gather(
    corners: Mapping[Identity, tuple[Identity, Identity]],
    each: tuple[Shown, ...],
    ground: Ground,
    silent: tuple[str, ...],
) -> _Gathered:
    up, down, small = ([getattr(shown.evidence, name) for shown in each] for name in ("p_up", "p_down", "p_small"))
    counts = Counts(*(count_shown(p, alpha=ALPHA / 2) for p in (up, down, small)))
    return _Gathered(corners, each, counts, _pooled(each), ground.caveats, silent)


def _pooled(each: Sequence[Shown]) -> Pooled | Undefined:
    effects, variances = [], []
    for shown in each:
        value, se = shown.evidence.estimate.estimate, shown.evidence.estimate.se
        if shown.evidence.counts and not isinstance(value, Undefined) and not isinstance(se, Undefined):
            effects.append(value)
            variances.append(se**2)
    return pool(effects, variances) if len(effects) > 1 else NONE_TO_POOL


def _judged(gathered: Sequence[_Gathered], *, margin: float, fdr: float) -> Iterator[Recurrence]:
    """Adjust over the board, then give each contrast the first verdict that fits."""
    family = [at for at, each in enumerate(gathered) if len(each.each) > 1]
    two = dict(zip(family, discovery_adjusted([_either(gathered[at], 2) for at in family]), strict=True))
    one = dict(zip(family, discovery_adjusted([_either(gathered[at], 1) for at in family]), strict=True))
    alone = Undefined("one study only: nothing to see again")
    for at, contrast in enumerate(gathered):
        r_value, r_value_one = two.get(at, alone), one.get(at, alone)
        yield Recurrence(
            contrast.corners,
            contrast.each,
            contrast.counts,
            r_value,
            r_value_one,
            contrast.pooled,
            _verdict(contrast, r_value, r_value_one, margin=margin, fdr=fdr),
            small_in_each=all(shown.evidence.p_small <= ALPHA / 2 for shown in contrast.each),
            agree_in_sign=len({_sign(shown) for shown in contrast.each}) == 1,
            caveats=contrast.caveats,
            silent=contrast.silent,
        )


def _either(contrast: _Gathered, studies: int) -> float:
    """Evidence that at least so many studies show it, in the same direction, whichever that is."""
    up = at_least([shown.evidence.p_up for shown in contrast.each], studies)
    down = at_least([shown.evidence.p_down for shown in contrast.each], studies)
    return min(1.0, 2 * min(up, down))


def _sign(shown: Shown) -> int:
    value = shown.evidence.estimate.estimate
    return 0 if isinstance(value, Undefined) else (value > 0) - (value < 0)


def _verdict(
    contrast: _Gathered,
    r_value: float | Undefined,
    r_value_one: float | Undefined,
    *,
    margin: float,
    fdr: float,
) -> VerdictCode:
    counts = contrast.counts
    if isinstance(r_value, Undefined) or isinstance(r_value_one, Undefined):
        return "single"
    if counts.nil >= 2 and _pooled_is_small(contrast, margin):
        return "small"
    if counts.up >= 1 and counts.down >= 1:
        return "opposite"
    if max(counts.up, counts.down) >= 2 and r_value <= fdr:
        return "seen_again"
    if max(counts.up, counts.down) >= 1 and r_value_one <= fdr:
        return "once"
    return "unsettled"


def _pooled_is_small(contrast: _Gathered, margin: float) -> bool:
    """Whether the pooled interval lies within the margin, and from four studies on the prediction does too."""
    pooled = contrast.pooled
    if isinstance(pooled, Undefined) or not _within(pooled.lower, pooled.upper, margin):
        return False
    return pooled.studies < 4 or _within(pooled.prediction.lower, pooled.prediction.upper, margin)


def _within(lower: float | Undefined, upper: float | Undefined, margin: float) -> bool:
    return not isinstance(lower, Undefined) and not isinstance(upper, Undefined) and -margin < lower <= upper < margin
