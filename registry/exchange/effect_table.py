"""A table of effects on file: one study a row, with its variance or standard error."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path

from registry.errors import Fault, InputRefused, ReadingRefused
from registry.exchange.csv_trouble import csv_trouble
from registry.exchange.workbooks import first_sheet
from registry.trials.readings import read_decimal

NEEDED = "its columns are study, effect, and variance or se"


@dataclass(frozen=True)
class EffectRow:
    """One study: its effect and the variance of its estimate, exactly as written."""

    study: str
    effect: Decimal
    variance: Decimal


def read_effects(path: Path) -> tuple[EffectRow, ...]:
    """Read every study of a CSV file or workbook.

    Raises InputRefused with the line and column of whatever is wrong: a column that is
    not there, a study named twice or not at all, a text that is no number, a variance or
    standard error that is not above 0.
    """
    rows = _rows(path)
    heads = [head.strip() for head in next(rows, (0, ()))[1]]
    if not heads:
        raise InputRefused(Fault(path.name, "there is nothing in it", f"give a table; {NEEDED}"))
    spread = "variance" if "variance" in heads else "se"
    for name in ("study", "effect", spread):
        if heads.count(name) != 1:
            given = "there is no such column" if name not in heads else f"{heads.count(name)} columns have this head"
            raise InputRefused(Fault(f"{path.name}, column {name!r}", given, NEEDED))
    places = [heads.index(name) for name in ("study", "effect", spread)]
    found: dict[str, EffectRow] = {}
    for line, row in rows:
        if not any(value.strip() for value in row):
            continue
        if len(row) != len(heads):
            where = f"{path.name}, line {line}"
            raise InputRefused(Fault(where, f"{len(row)} values given", f"give {len(heads)}, one for every head"))
        effect = _read(path, line, spread, [row[place].strip() for place in places])
        if effect.study in found:
            where = f"{path.name}, line {line}, column study"
            raise InputRefused(Fault(where, f"{effect.study!r} stands there already", "give each study one row"))
        found[effect.study] = effect
    if not found:
        raise InputRefused(Fault(path.name, "it has heads and no rows", "give one study a row below the heads"))
    return tuple(found.values())


def _rows(path: Path) -> Iterator[tuple[int, Sequence[str]]]:
    try:
        if path.suffix.lower() == ".xlsx":
            yield from enumerate(first_sheet(path.name, path.read_bytes()), start=1)
            return
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.reader(file, strict=True)
            for row in reader:
                yield reader.line_num, row
    except FileNotFoundError:
        raise InputRefused(
            Fault(str(path), "there is no such file", "give the path of a CSV file or workbook")
        ) from None
    except (IsADirectoryError, PermissionError) as error:
        raise InputRefused(Fault(str(path), str(error.strerror), "give a file that can be read")) from None
    except UnicodeDecodeError:
        raise InputRefused(Fault(path.name, "it is not text in UTF-8", "save it as CSV in UTF-8")) from None
    except csv.Error as error:
        raise InputRefused(Fault(path.name, csv_trouble(error), "check the quotes")) from None


def _read(path: Path, line: int, spread: str, texts: Sequence[str]) -> EffectRow:
    study, effect, size = texts
    if not study:
        raise InputRefused(Fault(f"{path.name}, line {line}, column study", "nothing given", "name the study"))
    numbers = []
    for name, text in (("effect", effect), (spread, size)):
        try:
            numbers.append(read_decimal(text))
        except ReadingRefused as error:
            fault = error.faults[0]
            where = f"{path.name}, line {line}, column {name}"
            raise InputRefused(Fault(where, fault.given, fault.accepted)) from None
    if numbers[1] <= 0:
        raise InputRefused(
            Fault(f"{path.name}, line {line}, column {spread}", f"{size} given", "give a number above 0")
        )
    return EffectRow(study, numbers[0], numbers[1] if spread == "variance" else numbers[1] ** 2)
