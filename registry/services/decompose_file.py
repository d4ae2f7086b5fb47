"""Decomposing a table on file, without a database."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from registry.analysis.decomposition import decompose
from registry.analysis.results import Decomposition, ErrorPolicy
from registry.errors import Fault, InputRefused
from registry.exchange.trial_table import Columns, tally_table
from registry.services.decomposition_record import as_record
from registry.services.decomposition_report import as_report


@dataclass(frozen=True)
class FileWish:
    """What somebody wants of a table on file; ``step`` as typed, or nothing to read it off the decimals."""

    path: Path
    response: str
    factors: tuple[str, ...]
    block: str | None
    step: str | None
    error: ErrorPolicy
    confidence: float


@dataclass(frozen=True)
class FileAnswer:
    """The decomposition of a table on file, with what was noticed while reading it."""

    wish: FileWish
    step: str
    result: Decomposition
    notes: tuple[str, ...]

    def record(self) -> dict[str, Any]:
        """Write it as the record that people script against."""
        return as_record(self.result, response=self.wish.response, step=self.step, notes=self.notes)

    def report(self) -> str:
        """Write it for people to read."""
        return as_report(self.result, response=self.wish.response, step=self.step, notes=self.notes)


def decompose_file(wish: FileWish) -> FileAnswer:
    """Read a table, tally it exactly, and take it apart."""
    table = tally_table(wish.path, Columns(wish.response, wish.factors, wish.block, wish.step))
    lone = [factor for factor in table.study.layout.factors if len(factor.levels) < 2]
    if lone:
        raise InputRefused(
            Fault(
                f"{wish.path.name}, column {lone[0].name}",
                f"every row has {lone[0].levels[0]!r}",
                "leave the column out, or give a factor with two levels or more",
            )
        )
    result = decompose(table.study, error=wish.error, confidence=wish.confidence)
    rows = "row has no reading and is" if table.left_out == 1 else "rows have no reading and are"
    notes = (f"{table.left_out} {rows} left out",) if table.left_out else ()
    return FileAnswer(wish, str(table.step), result, notes)
