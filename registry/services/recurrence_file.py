"""Which interactions are seen again in a table of several studies, without a database."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path
from typing import Any

from registry.analysis.results import ErrorPolicy
from registry.errors import Fault, InputRefused, ReadingRefused
from registry.exchange.trial_table import Columns, TalliedTablePart, tally_studies
from registry.services.lasting_names import LevelName, Names
from registry.services.recurrence_record import board_record
from registry.services.recurrence_report import as_report
from registry.synthesis.contributions import Contribution, FactorPart
from registry.synthesis.recurrence import Board, board
from registry.trials.readings import read_decimal


@dataclass(frozen=True)
class RecurrenceWish:
    """What somebody wants of a table of several studies; margin as typed."""

    path: Path
    study: str
    response: str
    factors: tuple[str, ...]
    block: str | None
    error: ErrorPolicy
    margin: str
    fdr: float


@dataclass(frozen=True)
class RecurrenceAnswer:
    """The board of a table, with everything's name and what was noticed while reading it."""

    wish: RecurrenceWish
    margin: Decimal
    board: Board
    names: Names
    notes: tuple[str, ...]

    def record(self) -> dict[str, Any]:
        """Write it as the record that people script against."""
        return board_record(self.board, self.names, notes=self.notes)

    def report(self) -> str:
        """Write it for people to read."""
        return as_report(self.board, self.names, response=self.wish.response, margin=self.margin, notes=self.notes)


def recurrence_file(wish: RecurrenceWish) -> RecurrenceAnswer:
    """Read a table, tally each of its studies exactly, and judge every interaction contrast over them."""
    if len(wish.factors) < 2:
        raise InputRefused(Fault("--factor", f"{len(wish.factors)} given", "name at least two, an interaction has two"))
    if not 0 < wish.fdr < 1:
        raise InputRefused(Fault("--fdr", f"{wish.fdr} given", "give a number between 0 and 1, as 0.05"))
    try:
        margin = read_decimal(wish.margin)
    except ReadingRefused as error:
        raise InputRefused(Fault("--margin", error.faults[0].given, "give a number above 0, for example 0.8")) from None
    if margin <= 0:
        raise InputRefused(Fault("--margin", f"{wish.margin} given", "give a number above 0, in units of the response"))
    parts = tally_studies(wish.path, Columns(wish.response, wish.factors, wish.block, study=wish.study))
    contributions = [_contribution(part, wish) for part in parts]
    found = board(contributions, margin=float(margin), fdr=wish.fdr)
    return RecurrenceAnswer(wish, margin, found, _names(parts), tuple(_notes(parts)))


def _contribution(part: TalliedTablePart, wish: RecurrenceWish) -> Contribution:
    crossed, block = part.study.layout.factors, part.study.layout.block
    parts = [
        FactorPart(factor.name, "treatment", tuple((factor.name, level) for level in factor.levels))
        for factor in crossed
    ]
    if block is not None:
        parts.append(FactorPart(block.name, "block", tuple((block.name, level) for level in block.levels)))
    parts += [FactorPart(factor.name, "held", ((factor.name, factor.levels[0]),)) for factor in part.held]
    # The order of factors is that of the wish, whichever of them the first study held.
    parts.sort(key=lambda each: (*wish.factors, wish.block).index(str(each.factor)))
    return Contribution(part.name, part.name, part.study, tuple(parts), wish.error)


def _names(parts: tuple[TalliedTablePart, ...]) -> Names:
    factors: dict[Any, str] = {}
    levels: dict[Any, LevelName] = {}
    for part in parts:
        block = part.study.layout.block
        for factor in (*part.study.layout.factors, *part.held, *((block,) if block else ())):
            factors[factor.name] = factor.name
            levels.update({(factor.name, level): LevelName(level, (), None) for level in factor.levels})
    return Names(factors, levels)


def _notes(parts: tuple[TalliedTablePart, ...]) -> list[str]:
    notes = []
    for part in parts:
        if part.left_out:
            rows = "row has no reading and is" if part.left_out == 1 else "rows have no reading and are"
            notes.append(f"{part.name}: {part.left_out} {rows} left out")
        notes += [f"{part.name}: {factor.name} was held at {factor.levels[0]}" for factor in part.held]
    return notes
