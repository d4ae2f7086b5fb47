"""Checking the rows of a file against a study: every fault by line and column, nothing written."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Literal
from zoneinfo import ZoneInfo

from registry.errors import Fault, InputRefused, OffGrid, ReadingRefused
from registry.exchange.uploads import UploadedRow, UploadedTable
from registry.services.trial_check import checked_level, checked_reading, time_faults
from registry.services.trial_log import LONGEST_NOTE
from registry.storage.frame import FrameFactor, FrameResponse, StudyFrame

ColumnKind = Literal["factor", "response", "happened_at", "note", "skip"]

_TIME_HEADS = ("happened at", "happened_at", "when", "time", "date", "moment")
_NOTE_HEADS = ("note", "notes", "remark", "remarks", "comment")


@dataclass(frozen=True)
class ColumnChoice:
    """What one column of a file means; ``target`` names the factor or response."""

    kind: ColumnKind
    target: str = ""


@dataclass(frozen=True)
class Offer:
    """A reading between two steps, with the value on the grid that may stand in for it."""

    line: int
    column: str
    given: str
    offered: str


@dataclass(frozen=True)
class CheckedRow:
    """One row that fits the study."""

    line: int
    cell: int
    readings: tuple[tuple[int, int], ...]
    happened_at: datetime | None
    note: str


@dataclass(frozen=True)
class CheckedTable:
    """What a file would bring: rows that fit, faults, values that would be rounded, rows without a reading."""

    rows: tuple[CheckedRow, ...]
    faults: tuple[Fault, ...]
    offers: tuple[Offer, ...]
    left_out: tuple[int, ...]


def guessed_choices(frame: StudyFrame, columns: Sequence[str]) -> tuple[ColumnChoice, ...]:
    """Guess what each column means from its head; a head that says nothing is skipped."""
    factors = {factor.name.casefold(): factor.name for factor in frame.factors}
    responses = {response.name.casefold(): response.name for response in frame.responses}
    return tuple(_guess(column.casefold(), factors, responses) for column in columns)


def _guess(head: str, factors: dict[str, str], responses: dict[str, str]) -> ColumnChoice:
    if head in factors:
        return ColumnChoice("factor", factors[head])
    if head in responses:
        return ColumnChoice("response", responses[head])
    if head in _TIME_HEADS:
        return ColumnChoice("happened_at")
    return ColumnChoice("note" if head in _NOTE_HEADS else "skip")


def choice_faults(frame: StudyFrame, columns: Sequence[str], choices: Sequence[ColumnChoice]) -> list[Fault]:
    """Say what is wrong with the choices themselves: a factor without a column, or with two."""
    if len(choices) != len(columns):
        return [Fault("columns", f"{len(choices)} choices given", f"choose for each of the {len(columns)} columns")]
    faults: list[Fault] = []
    names = {"factor": {factor.name for factor in frame.factors}, "response": {r.name for r in frame.responses}}
    for place, (column, choice) in enumerate(zip(columns, choices, strict=True)):
        if choice.kind in names and choice.target not in names[choice.kind]:
            faults.append(
                Fault(f"column {column}", f"{choice.target!r} is no {choice.kind} of this study",
                      "choose one of " + ", ".join(sorted(names[choice.kind])), f"choice-{place}")
            )  # fmt: skip
    for factor in frame.chosen:
        faults += _once("factor", factor.name, choices, needed=True)
    for response in frame.responses:
        faults += _once("response", response.name, choices, needed=False)
    faults += _once("happened_at", "", choices, needed=False)
    faults += _once("note", "", choices, needed=False)
    if not any(choice.kind == "response" for choice in choices):
        faults.append(Fault("columns", "no column is a response", "choose at least one column that holds readings"))
    return faults


def _once(kind: ColumnKind, target: str, choices: Sequence[ColumnChoice], *, needed: bool) -> list[Fault]:
    count = sum(choice == ColumnChoice(kind, target) for choice in choices)
    if count == 1 or (count == 0 and not needed):
        return []
    name = target or kind.replace("_", " ")
    given = "no column" if count == 0 else f"{count} columns"
    return [Fault("columns", f"{given} chosen for {name}", "choose exactly one")]


def check_rows(
    frame: StudyFrame,
    table: UploadedTable,
    choices: Sequence[ColumnChoice],
    *,
    zone: ZoneInfo,
    now: datetime,
    rounding: bool,
) -> CheckedTable:
    """Check every row and every value; goes on after a fault, so that all are named at once."""
    reader = _RowReader(frame, table.columns, choices, zone=zone, now=now, rounding=rounding)
    rows = [row for given in table.rows if (row := reader.read(given)) is not None]
    return CheckedTable(tuple(rows), tuple(reader.faults), tuple(reader.offers), tuple(reader.left_out))


class _RowReader:
    """Reads rows one after another and gathers what is wrong with them."""

    def __init__(
        self,
        frame: StudyFrame,
        columns: Sequence[str],
        choices: Sequence[ColumnChoice],
        *,
        zone: ZoneInfo,
        now: datetime,
        rounding: bool,
    ) -> None:
        self.faults: list[Fault] = []
        self.offers: list[Offer] = []
        self.left_out: list[int] = []
        self._frame, self._zone, self._now, self._rounding = frame, zone, now, rounding
        self._columns = columns
        place = {(choice.kind, choice.target): at for at, choice in enumerate(choices) if choice.kind != "skip"}
        factors = {factor.name: factor for factor in frame.factors}
        self._chosen = [(place["factor", factor.name], factor) for factor in frame.chosen]
        self._held = [
            (at, factors[name])
            for (kind, name), at in place.items()
            if kind == "factor" and factors[name].role == "held"
        ]
        self._responses = [
            (place["response", response.name], response)
            for response in frame.responses
            if ("response", response.name) in place
        ]
        self._time = place.get(("happened_at", ""))
        self._note = place.get(("note", ""))

    def read(self, row: UploadedRow) -> CheckedRow | None:
        """Read one row; None when it has a fault or no reading."""
        before = len(self.faults)
        readings = self._readings(row)
        if not readings and len(self.faults) == before and not self._offered(row):
            self.left_out.append(row.line)
            return None
        for at, factor in self._held:
            self._rank(row, at, factor)
        ranks = [self._rank(row, at, factor) for at, factor in self._chosen]
        happened_at = self._moment(row)
        note = row.values[self._note].strip() if self._note is not None else ""
        if len(note) > LONGEST_NOTE:
            self._fault(row, self._note or 0, f"{len(note)} characters given", f"give at most {LONGEST_NOTE}")
        if len(self.faults) > before:
            return None
        cell = self._frame.cells[tuple(rank for rank in ranks if rank is not None)]
        return CheckedRow(row.line, cell, tuple(readings), happened_at, note)

    def _offered(self, row: UploadedRow) -> bool:
        return bool(self.offers) and self.offers[-1].line == row.line

    def _rank(self, row: UploadedRow, at: int, factor: FrameFactor) -> int | None:
        try:
            return checked_level(factor, row.values[at], place=self._place(row, at), field="")
        except InputRefused as error:
            self.faults += error.faults
            return None

    def _readings(self, row: UploadedRow) -> list[tuple[int, int]]:
        readings: list[tuple[int, int]] = []
        for at, response in self._responses:
            if row.values[at].strip():
                steps = self._steps(row, at, response)
                readings += [] if steps is None else [(response.response_id, steps)]
        return readings

    def _steps(self, row: UploadedRow, at: int, response: FrameResponse) -> int | None:
        text, place = row.values[at], self._place(row, at)
        try:
            return checked_reading(response, text, place=place, field="")
        except OffGrid as error:
            self.offers.append(Offer(row.line, self._columns[at], text.strip(), error.offered))
            return checked_reading(response, text, place=place, field="", rounding=True) if self._rounding else None
        except ReadingRefused as error:
            self.faults += error.faults
            return None

    def _moment(self, row: UploadedRow) -> datetime | None:
        if self._time is None or not row.values[self._time].strip():
            return None
        text = row.values[self._time].strip()
        try:
            moment = datetime.fromisoformat(text)
        except ValueError:
            self._fault(row, self._time, f"{text!r} given", "write the time as 2026-03-02 14:05")
            return None
        # A time without a zone is the site's own wall clock.
        moment = moment if moment.tzinfo else moment.replace(tzinfo=self._zone)
        self.faults += time_faults(moment, now=self._now, where=self._place(row, self._time))
        return moment

    def _place(self, row: UploadedRow, at: int) -> str:
        return f"line {row.line}, column {self._columns[at]}"

    def _fault(self, row: UploadedRow, at: int, given: str, accepted: str) -> None:
        self.faults.append(Fault(self._place(row, at), given, accepted))
