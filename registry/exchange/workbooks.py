"""The first sheet of a workbook, read as the texts that people see in it."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date, datetime, time, timedelta
from io import BytesIO

from registry.errors import Fault, InputRefused


def first_sheet(name: str, content: bytes) -> Iterator[tuple[str, ...]]:
    """Give every row of a workbook's first sheet as texts; raises InputRefused when it is no workbook."""
    from python_calamine import CalamineError, CalamineWorkbook

    try:
        rows = CalamineWorkbook.from_filelike(BytesIO(content)).get_sheet_by_index(0).to_python(skip_empty_area=False)
    except CalamineError as error:
        raise InputRefused(Fault(name, str(error), "give a workbook (.xlsx) or a CSV file in UTF-8", "file")) from None
    for row in rows:
        yield tuple(_text(value) for value in row)


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
