"""A file that somebody gives, read as a table of texts with the line of every row."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from io import StringIO

from registry.errors import Fault, InputRefused
from registry.exchange.csv_trouble import csv_trouble

LARGEST_UPLOAD = 20 * 1024 * 1024
DELIMITERS = (",", ";", "\t")


@dataclass(frozen=True)
class UploadedRow:
    """One row below the heads; ``line`` is where it begins in the file, counted from 1."""

    line: int
    values: tuple[str, ...]


@dataclass(frozen=True)
class UploadedTable:
    """A whole file: heads, and rows as long as the heads."""

    columns: tuple[str, ...]
    rows: tuple[UploadedRow, ...]


def read_uploaded(name: str, content: bytes) -> UploadedTable:
    """Read a delimited text file or a workbook's first sheet.

    Raises InputRefused naming the line when a row is longer or shorter than the heads,
    when a head is missing or stands twice, or when the text is not UTF-8.
    """
    if len(content) > LARGEST_UPLOAD:
        raise _refused(
            name, f"{len(content) / 1024 / 1024:.1f} MB", f"give at most {LARGEST_UPLOAD // 1024 // 1024} MB"
        )
    rows = list(_rows_of_text(name, content)) if not _is_workbook(content) else list(_rows_of_workbook(name, content))
    rows = [row for row in rows if any(value.strip() for value in row.values)]
    if not rows:
        raise _refused(name, "there is nothing in it", "give a table with a row of heads and one trial a row")
    heads = tuple(value.strip() for value in rows[0].values)
    _refuse_bad_heads(name, heads)
    _refuse_ragged_rows(rows[1:], len(heads))
    if len(rows) == 1:
        raise _refused(name, "it has heads and no rows", "give one trial a row below the heads")
    return UploadedTable(heads, tuple(rows[1:]))


def _is_workbook(content: bytes) -> bool:
    return content.startswith(b"PK\x03\x04")


def _rows_of_text(name: str, content: bytes) -> Iterator[UploadedRow]:
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise _refused(f"{name}, line {line}", "it is not text in UTF-8", "save the file as CSV in UTF-8") from None
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        raise _refused(f"{name}, line {line}", "it is not plain text", "give a CSV file or a workbook (.xlsx)")
    first = text.split("\n", 1)[0]
    delimiter = max(DELIMITERS, key=first.count)
    reader = csv.reader(StringIO(text, newline=""), delimiter=delimiter, strict=True)
    line = 1
    try:
        for values in reader:
            yield UploadedRow(line, tuple(values))
            line = reader.line_num + 1
    except csv.Error as error:
        raise _refused(f"{name}, line {line}", csv_trouble(error), "check the quotes of that row") from None


def _rows_of_workbook(name: str, content: bytes) -> Iterator[UploadedRow]:
    from registry.exchange.workbooks import first_sheet

    for line, values in enumerate(first_sheet(name, content), start=1):
        yield UploadedRow(line, values)


def _refuse_bad_heads(name: str, heads: tuple[str, ...]) -> None:
    faults = [
        Fault(f"{name}, column {place}", "it has no head", "give every column a head")
        for place, head in enumerate(heads, start=1)
        if not head
    ]
    faults += [
        Fault(name, f"{times} columns are headed {head!r}", "give every column its own head")
        for head, times in Counter(heads).items()
        if head and times > 1
    ]
    if faults:
        raise InputRefused(faults)


def _refuse_ragged_rows(rows: list[UploadedRow], width: int) -> None:
    faults = [
        Fault(f"line {row.line}", f"{len(row.values)} values given", f"give {width}, one for every head")
        for row in rows
        if len(row.values) != width
    ]
    if faults:
        raise InputRefused(faults)


def _refused(where: str, given: str, accepted: str) -> InputRefused:
    return InputRefused(Fault(where, given, accepted, "file"))
