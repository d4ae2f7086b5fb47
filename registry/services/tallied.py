"""Stored tallies arranged as an analysis takes them."""

from __future__ import annotations

from collections.abc import Mapping

from registry.analysis.results import ErrorPolicy
from registry.storage.frame import FrameResponse, StudyFrame
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.tallies import TalliedStudy, Tally


def tallied_study(frame: StudyFrame, response: FrameResponse, tallies: Mapping[int, Tally]) -> TalliedStudy:
    """Arrange stored tallies by level places, the block's in front."""
    factors = tuple(Factor(factor.name, factor.levels) for factor in frame.treatments)
    block = Factor(frame.block.name, frame.block.levels) if frame.block else None
    ranks = frame.ranks
    # A cell lists its ranks in the order of the chosen factors, where the block is the last one.
    keyed = {((ranks[cell][-1], *ranks[cell][:-1]) if block else ranks[cell]): tally for cell, tally in tallies.items()}
    return TalliedStudy(Layout(factors, block), response.step.fraction, response.anchor or 0, keyed)


def policy_of(spread: str | None, *, blocked: bool) -> ErrorPolicy:
    """Give a study's one spread policy as the analysis calls it; shared until a plan says otherwise."""
    return "per-cell" if spread == "own" and not blocked else "pooled"
