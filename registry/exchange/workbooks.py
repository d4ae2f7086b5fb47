"""The first sheet of a workbook, read as the texts that people see in it."""

from __future__ import annotations

import re
from collections.abc import Iterator
from datetime import date, datetime, time, timedelta
from io import BytesIO
from zipfile import BadZipFile, ZipFile

from registry.errors import Fault, InputRefused

MOST_UNPACKED = 400 * 1024**2
MOST_CELLS = 8_000_000
_SHEET = re.compile(r"xl/worksheets/[^/]+\.xml")
_CELL = re.compile(rb'<(?:\w+:)?c [^>]*?r="([A-Z]{1,3})([0-9]{1,7})"')


def first_sheet(name: str, content: bytes) -> Iterator[tuple[str, ...]]:
    """Give every row of a workbook's first sheet as texts; raises InputRefused when it is no workbook."""
    from python_calamine import CalamineError, CalamineWorkbook

    _refuse_far_cells(name, content)
    try:
        rows = CalamineWorkbook.from_filelike(BytesIO(content)).get_sheet_by_index(0).to_python(skip_empty_area=False)
    except CalamineError as error:
        raise InputRefused(Fault(name, str(error), "give a workbook (.xlsx) or a CSV file in UTF-8", "file")) from None
    for row in rows:
        yield tuple(_text(value) for value in row)


def _refuse_far_cells(name: str, content: bytes) -> None:
    """Refuse a workbook that unpacks to too much, or whose cells lie too far apart, before it is opened.

    The reader makes every cell between the first one and the farthest, filled or not: a
    single value in the last corner of a sheet would take more memory than a machine has.
    """
    try:
        with ZipFile(BytesIO(content)) as book:
            unpacked = sum(entry.file_size for entry in book.infolist())
            if unpacked > MOST_UNPACKED:
                given = f"it unpacks to {unpacked // 1024**2} MB"
                raise InputRefused(Fault(name, given, f"give at most {MOST_UNPACKED // 1024**2} MB", "file"))
            sheets = [entry for entry in book.infolist() if _SHEET.fullmatch(entry.filename)]
            for sheet in sheets:
                columns, rows = _extent(book.read(sheet))
                if columns * rows > MOST_CELLS:
                    given = f"a sheet reaches to column {columns} and row {rows}"
                    accepted = f"clear what lies far from the table; at most {MOST_CELLS} cells can be read"
                    raise InputRefused(Fault(name, given, accepted, "file"))
    except BadZipFile:
        return  # The reader says what is wrong with it.


def _extent(sheet: bytes) -> tuple[int, int]:
    """Give the farthest column and row that a sheet's cells name."""
    columns = rows = 0
    for letters, digits in _CELL.findall(sheet):
        rows = max(rows, int(digits))
        place = 0
        for letter in letters:
            place = place * 26 + letter - 64
        columns = max(columns, place)
    return columns, rows


def _text(value: object) -> str:
    """Write a value as it was typed: the reader gives whole numbers as floats, and floats in full."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        # repr is the shortest text that reads back as the same number: what was typed, up to 15 digits.
        return str(int(value)) if value.is_integer() and abs(value) < 2**53 else repr(value)
    if isinstance(value, datetime | date | time):
        return value.isoformat()
    if isinstance(value, timedelta):
        return str(value)
    return str(value)
