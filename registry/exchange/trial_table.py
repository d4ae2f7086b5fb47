"""A table of trials on file, tallied exactly without a database, a distinct reading at a time."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from itertools import islice
from operator import itemgetter
from pathlib import Path
from typing import Any

from registry.errors import Fault, InputRefused, ReadingRefused
from registry.exchange.csv_trouble import csv_trouble
from registry.exchange.workbooks import first_sheet
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.readings import Step, read_decimal, read_steps, steps_reader
from registry.trials.tallies import EMPTY, TalliedStudy, Tally

_CHUNK = 20_000


@dataclass(frozen=True)
class _Sums:
    """Tallies by level places, the anchor they are told from, and how many rows had no reading."""

    tallies: dict[tuple[int, ...], Tally]
    anchor: int
    left_out: int


@dataclass(frozen=True)
class Columns:
    """Which columns of a table are what; ``step`` as typed, or nothing to read it off the decimals."""

    response: str
    factors: tuple[str, ...]
    block: str | None = None
    step: str | None = None
    study: str | None = None

    @property
    def named(self) -> tuple[str, ...]:
        """The columns that a row is told by, in the order of a key: study, block, factors, response."""
        leading = tuple(name for name in (self.study, self.block) if name)
        return (*leading, *self.factors, self.response)


@dataclass(frozen=True)
class TalliedTable:
    """A table's trials as tallies; ``left_out`` counts the rows without a reading."""

    study: TalliedStudy
    step: Step
    left_out: int


@dataclass(frozen=True)
class TalliedTablePart:
    """One study of a table: its tallies, what it held at one level, and how many rows had no reading."""

    name: str
    study: TalliedStudy
    held: tuple[Factor, ...]
    left_out: int


def tally_table(path: Path, columns: Columns) -> TalliedTable:
    """Tally every trial of a CSV file or workbook.

    Each distinct row of levels and reading is parsed once, however often it stands there.
    Raises InputRefused with the line and column of whatever is wrong: a column that is
    not there, a row too long or short, an empty level, a text that is no number.
    """
    counts, step = _counted(path, columns)
    block, factors, sums = _levels_and_sums(path, columns, counts, step)
    return TalliedTable(
        TalliedStudy(Layout(factors, block), step.fraction, sums.anchor, sums.tallies), step, sums.left_out
    )


def tally_studies(path: Path, columns: Columns) -> tuple[TalliedTablePart, ...]:
    """Tally several studies that stand in one table, told apart by the study column.

    Each study crosses the levels that its own rows have; a factor that has a single one
    there was held at it. Studies stand in the order of their first rows. Raises as
    ``tally_table`` does.
    """
    counts, step = _counted(path, columns)
    of_study: dict[str, Counter[tuple[str, ...]]] = {}
    for key, times in counts.items():
        if not key[0].strip():
            continue  # A row that says nothing in any of these columns is not a trial.
        of_study.setdefault(key[0].strip(), Counter())[key] += times
    return tuple(_part(path, columns, name, some, step) for name, some in of_study.items())


def _part(path: Path, columns: Columns, name: str, counts: Counter[tuple[str, ...]], step: Step) -> TalliedTablePart:
    block, factors, sums = _levels_and_sums(path, columns, counts, step, of=f"study {name}")
    parts = [*([block] if block else []), *factors]
    varied = [place for place, factor in enumerate(parts) if len(factor.levels) > 1]
    crossed = tuple(parts[place] for place in varied if parts[place] is not block)
    layout = Layout(crossed, block if block and len(block.levels) > 1 else None)
    tallies = {tuple(cell[place] for place in varied): tally for cell, tally in sums.tallies.items()}
    held = tuple(factor for factor in factors if len(factor.levels) == 1)
    return TalliedTablePart(name, TalliedStudy(layout, step.fraction, sums.anchor, tallies), held, sums.left_out)


def _counted(path: Path, columns: Columns) -> tuple[Counter[tuple[str, ...]], Step]:
    _refuse_one_column_twice(columns)
    counts = _count_rows(path, columns)
    step = Step.parse(columns.step) if columns.step else _step_of(path, columns, counts)
    _refuse_no_level(path, columns, counts)
    return counts, step


def _levels_and_sums(
    path: Path, columns: Columns, counts: Counter[tuple[str, ...]], step: Step, *, of: str = ""
) -> tuple[Factor | None, tuple[Factor, ...], _Sums]:
    """Name the levels in the order in which they first appear among rows with a reading, and tally the rows."""
    names = [name for name in columns.named[:-1] if name != columns.study]
    levels: list[dict[str, int]] = [{} for _ in names]
    for key in counts:
        if key[-1].strip():
            for known, level in zip(levels, key[-1 - len(names) : -1], strict=True):
                known.setdefault(level.strip(), len(known))
    sums = _tally(path, columns, counts, levels, step, of=of)
    factors = [Factor(name, tuple(known)) for name, known in zip(names, levels, strict=True)]
    block = factors.pop(0) if columns.block else None
    return block, tuple(factors), sums


def _refuse_one_column_twice(columns: Columns) -> None:
    twice = [name for name, times in Counter(columns.named).items() if times > 1]
    if twice:
        raise InputRefused(Fault("columns", f"{twice[0]!r} is named twice", "give each column one part to play"))


def _rows(path: Path) -> Iterator[Sequence[str]]:
    """Give the rows of the file as texts, the heads first; blank rows are not rows."""
    if path.is_char_device() or path.is_block_device():
        raise InputRefused(Fault(str(path), "it is a device", "give the path of a CSV file or workbook"))
    if path.suffix.lower() == ".xlsx":
        yield from first_sheet(path.name, path.read_bytes())
        return
    with path.open(encoding="utf-8-sig", newline="") as file:
        yield from csv.reader(file, strict=True)


def _count_rows(path: Path, columns: Columns) -> Counter[tuple[str, ...]]:
    """Count how often each combination of levels and reading stands in the file, in order of first appearance."""
    counts: Counter[tuple[str, ...]] = Counter()
    try:
        rows = _rows(path)
        heads = next((row for row in rows if any(value.strip() for value in row)), None)
        if heads is None:
            raise InputRefused(Fault(path.name, "there is nothing in it", "give a table with a row of heads"))
        wanted = itemgetter(*_places(path, heads, columns))
        width = len(heads)
        while chunk := list(islice(rows, _CHUNK)):
            if set(map(len, chunk)) != {width}:
                chunk = _kept_rows(path, chunk, width)
            counts.update(map(wanted, chunk))
    except FileNotFoundError:
        raise InputRefused(
            Fault(str(path), "there is no such file", "give the path of a CSV file or workbook")
        ) from None
    except (IsADirectoryError, PermissionError) as error:
        raise InputRefused(Fault(str(path), str(error.strerror), "give a file that can be read")) from None
    except UnicodeDecodeError:
        raise InputRefused(
            Fault(f"{path.name}, line {_undecodable_line(path)}", "it is not text in UTF-8", "save it as CSV in UTF-8")
        ) from None
    except csv.Error as error:
        raise InputRefused(Fault(f"{path.name}, {_bad_line(path)}", csv_trouble(error), "check the quotes")) from None
    if not counts:
        raise InputRefused(Fault(path.name, "it has heads and no rows", "give one trial a row below the heads"))
    return counts


def _undecodable_line(path: Path) -> int:
    """Find the line that is not UTF-8: the reader's own error counts from the start of some chunk."""
    content = path.read_bytes()
    try:
        content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        return content.count(b"\n", 0, error.start) + 1
    return 1


def _bad_line(path: Path) -> str:
    with path.open(encoding="utf-8-sig", newline="") as file:
        reader = csv.reader(file, strict=True)
        try:
            for _ in reader:
                pass
        except csv.Error:
            pass
        return f"line {reader.line_num}"


def _places(path: Path, heads: Sequence[str], columns: Columns) -> list[int]:
    """Find the columns by their heads: block, factors, response."""
    heads = [head.strip() for head in heads]
    for name in columns.named:
        if heads.count(name) != 1:
            given = "there is no such column" if name not in heads else f"{heads.count(name)} columns have this head"
            raise InputRefused(
                Fault(f"{path.name}, column {name!r}", given, "its columns are " + ", ".join(map(repr, heads)))
            )
    return [heads.index(name) for name in columns.named]


def _kept_rows(path: Path, chunk: list[Sequence[str]], width: int) -> list[Sequence[str]]:
    """Leave blank rows out; any other row of the wrong length is refused with its line."""
    kept = [row for row in chunk if any(value.strip() for value in row)]
    if any(len(row) != width for row in kept):
        line, row = next(found for found in _lined(path) if any(found[1]) and len(found[1]) != width)
        raise InputRefused(
            Fault(f"{path.name}, line {line}", f"{len(row)} values given", f"give {width}, one for every head")
        )
    return kept


def _lined(path: Path) -> Iterator[tuple[int, Sequence[str]]]:
    """Give every row with the line it begins on: the slow look, for naming a fault."""
    if path.suffix.lower() == ".xlsx":
        yield from enumerate(first_sheet(path.name, path.read_bytes()), start=1)
        return
    with path.open(encoding="utf-8-sig", newline="") as file:
        reader = csv.reader(file, strict=True)
        line = 1
        for row in reader:
            yield line, row
            line = reader.line_num + 1


def _where(path: Path, columns: Columns, key: tuple[str, ...], place: int) -> str:
    """Name the line and column in which a combination first stands."""
    rows = (found for found in _lined(path) if any(value.strip() for value in found[1]))
    _, heads = next(rows)
    wanted = itemgetter(*_places(path, heads, columns))
    line = next(line for line, row in rows if len(row) == len(heads) and wanted(row) == key)
    return f"{path.name}, line {line}, column {columns.named[place]}"


def _refuse_no_level(path: Path, columns: Columns, counts: Iterable[tuple[str, ...]]) -> None:
    for key in counts:
        if not any(value.strip() for value in key):
            continue  # A row that says nothing in any of these columns is counted as left out.
        for place, level in enumerate(key[:-1]):
            if not level.strip():
                raise InputRefused(Fault(_where(path, columns, key, place), "no level given", "give one"))


def _step_of(path: Path, columns: Columns, counts: Iterable[tuple[str, ...]]) -> Step:
    """Read the step off the decimals given: as many places as the longest reading has."""
    places = 0
    for text in {key[-1] for key in counts}:
        whole, point, digits = text.strip().partition(".")
        if whole.isdigit() and (digits.isdigit() or not point):
            places = max(places, len(digits))
        elif text.strip():
            places = max(places, _places_of_exponent(path, columns, counts, text))
    return Step.parse(f"1e-{places}")


def _places_of_exponent(path: Path, columns: Columns, counts: Iterable[tuple[str, ...]], text: str) -> int:
    try:
        exponent = read_decimal(text).as_tuple().exponent
    except ReadingRefused as error:
        key = next(key for key in counts if key[-1] == text)
        fault = error.faults[0]
        raise InputRefused(Fault(_where(path, columns, key, len(key) - 1), fault.given, fault.accepted)) from None
    return max(0, -exponent) if isinstance(exponent, int) else 0


def _tally(
    path: Path,
    columns: Columns,
    counts: Counter[tuple[str, ...]],
    levels: list[dict[str, int]],
    step: Step,
    *,
    of: str,
) -> _Sums:
    """Tally every distinct row as often as it stands in the file."""
    read = steps_reader(step)
    known: dict[str, int] = {}
    sums: dict[tuple[int, ...], list[int]] = {}
    anchor: int | None = None
    left_out = 0
    first = -1 - len(levels)
    for key, times in counts.items():
        text = key[-1]
        steps = known.get(text)
        if steps is None:
            if not text.strip():
                # A row that says nothing at all in these columns is a blank one, and none was left out.
                left_out += times if any(value.strip() for value in key) else 0
                continue
            steps = known[text] = _steps(path, columns, key, read, step)
        if anchor is None:
            anchor = steps
        distance = steps - anchor
        cell = tuple([places[level.strip()] for places, level in zip(levels, key[first:-1], strict=True)])
        found = sums.get(cell)
        if found is None:
            found = sums[cell] = [0, 0, 0]
        found[0] += times
        found[1] += distance * times
        found[2] += distance * distance * times
    if anchor is None:
        where = ", ".join(part for part in (path.name, of, f"column {columns.response}") if part)
        raise InputRefused(Fault(where, "no row has a reading", "give at least one"))
    return _Sums({cell: EMPTY.merge(Tally(*found)) for cell, found in sums.items()}, anchor, left_out)


def _steps(path: Path, columns: Columns, key: tuple[str, ...], read: Any, step: Step) -> int:
    steps = read(key[-1])
    if steps is not None:
        return int(steps)
    try:
        return read_steps(key[-1], step)
    except ReadingRefused as error:
        fault = error.faults[0]
        raise InputRefused(Fault(_where(path, columns, key, len(key) - 1), fault.given, fault.accepted)) from None
