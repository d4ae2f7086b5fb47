"""Reference data and small designs, as the engine takes them."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from decimal import Decimal
from pathlib import Path
from typing import Any

from registry.exchange.trial_table import Columns, tally_table
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.readings import Step, read_steps
from registry.trials.tallies import EMPTY, TalliedStudy, Tally

REFERENCE = Path(__file__).parent.parent / "reference"


def reference_study(name: str) -> tuple[TalliedStudy, dict[str, Any]]:
    """Give a reference data set as tallies, with its published or computed answers."""
    expected: dict[str, Any] = json.loads((REFERENCE / "factorial" / f"{name}.json").read_text())
    columns = Columns("y", tuple(expected["factors"]), expected["block"])
    return tally_table(REFERENCE / "factorial" / f"{name}.csv", columns).study, expected


def study_of(
    factors: Mapping[str, Sequence[str]], readings: Mapping[tuple[int, ...], Sequence[str]], *, step: str = "1"
) -> TalliedStudy:
    """Tally readings given by cell, as texts on a step; the first one is the anchor."""
    grid = Step.parse(step)
    steps = {cell: [read_steps(text, grid) for text in texts] for cell, texts in readings.items()}
    anchor = next(value for values in steps.values() for value in values)
    tallies: dict[tuple[int, ...], Tally] = {}
    for cell, values in steps.items():
        tally = EMPTY
        for value in values:
            tally = tally.add(value - anchor)
        tallies[cell] = tally
    layout = Layout(tuple(Factor(name, tuple(levels)) for name, levels in factors.items()))
    return TalliedStudy(layout, grid.fraction, anchor, tallies)


def log_relative_error(value: float, certified: str) -> float:
    """Give to how many digits a value agrees with a certified one; 16 when they are the same float."""
    true = Decimal(certified)
    gap = abs(Decimal(value) - true) / abs(true)
    return 16.0 if gap == 0 or value == float(true) else float(-gap.log10())
