"""Common ground: the levels that studies share, and what each averages over beside a contrast."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from registry.synthesis.contributions import Contribution, Identity

Corners = Mapping[Identity, tuple[Identity, Identity]]
CaveatCode = Literal["averaged_apart", "only_one_has", "held_apart", "slice"]


@dataclass(frozen=True)
class Caveat:
    """Something that differs, or is narrowed, beside a contrast.

    "slice": every study that has the factor is read at the one level they share.
    "averaged_apart": they share no level, so each averages over its own.
    "held_apart": it was held, at different levels. "only_one_has": some studies have not
    used the factor at all. ``levels`` gives each study's levels, () where it has none.
    """

    code: CaveatCode
    factor: Identity
    levels: Mapping[Identity, tuple[Identity, ...]]


@dataclass(frozen=True)
class Ground:
    """What studies average over beside a contrast: for every study and factor, which levels."""

    over: Mapping[Identity, Mapping[Identity, tuple[Identity, ...]]]
    caveats: tuple[Caveat, ...]


def ground_beside(studies: Sequence[Contribution], corners: Sequence[Identity]) -> Ground:
    """Find the ground that studies share beside the factors of a contrast.

    Every other factor is averaged equally over the levels that all studies having it
    share; a factor held at one level narrows the others to that slice. Where they share
    none, each averages over its own, and a caveat says so. Sum-to-zero offsets depend on
    the level set, so nothing across studies is ever made of them.
    """
    over: dict[Identity, dict[Identity, tuple[Identity, ...]]] = {study.key: {} for study in studies}
    caveats: list[Caveat] = []
    for factor in factors_in_order(studies):
        if factor in corners:
            continue
        having = {study.key: levels for study in studies if (levels := _averaged(study, factor))}
        if not having:
            continue
        shared = shared_levels(list(having.values()))
        for key, levels in having.items():
            over[key][factor] = shared or levels
        code = _caveat(studies, factor, having, shared)
        if code is not None:
            caveats.append(Caveat(code, factor, {study.key: having.get(study.key, ()) for study in studies}))
    return Ground(over, tuple(caveats))


def _averaged(study: Contribution, factor: Identity) -> tuple[Identity, ...]:
    part = study.part(factor)
    return part.levels if part is not None and part.role != "block" else ()


def _caveat(
    studies: Sequence[Contribution],
    factor: Identity,
    having: Mapping[Identity, tuple[Identity, ...]],
    shared: tuple[Identity, ...],
) -> CaveatCode | None:
    if not shared:
        held = all(len(levels) == 1 for levels in having.values())
        return "held_apart" if held else "averaged_apart"
    if len(having) < len(studies):
        return "only_one_has"
    return "slice" if len(shared) < max(len(levels) for levels in having.values()) else None


def shared_levels(each: Sequence[Sequence[Identity]]) -> tuple[Identity, ...]:
    """List the levels that stand in every one, in the order of the first."""
    return tuple(level for level in each[0] if all(level in levels for levels in each[1:]))


def factors_in_order(studies: Sequence[Contribution]) -> list[Identity]:
    """List every factor of some studies once, in order of first appearance."""
    return list(dict.fromkeys(part.factor for study in studies for part in study.parts))


def has_corners(study: Contribution, corners: Corners) -> bool:
    """Whether a study crosses every level that a contrast is made of."""
    crossed = {part.factor: part.levels for part in study.crossed}
    return all(factor in crossed and set(levels) <= set(crossed[factor]) for factor, levels in corners.items())


def ran_corners(study: Contribution, corners: Corners) -> bool:
    """Whether a study that crosses a contrast's levels has a trial at every combination of them."""
    counts = study.estimator.exact.n.reshape([len(part.levels) for part in study.crossed])
    places = [
        [part.levels.index(level) for level in corners[part.factor]]
        if part.factor in corners
        else range(len(part.levels))
        for part in study.crossed
    ]
    others = tuple(at for at, part in enumerate(study.crossed) if part.factor not in corners)
    return bool((counts[np.ix_(*places)].sum(axis=others) > 0).all())
