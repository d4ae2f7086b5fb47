"""A workbook's first sheet reads as what people see in it, and gives the same answers as the same table as CSV."""

from __future__ import annotations

import json
from datetime import date, datetime
from io import BytesIO
from pathlib import Path

import pytest
from openpyxl import Workbook

from registry.cli import main
from registry.errors import InputRefused
from registry.exchange.workbooks import first_sheet
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.study_report import study_report
from registry.services.trial_import import read_upload, run_import
from tests.support.studies import NOW, START, WALK, a_study

ROWS = [
    ["walk", "start", "minutes"],
    *[[walk, start, 20 + at / 10] for at in range(3) for walk in WALK.levels for start in START.levels],
]


def workbook(rows: list[list[object]], *, more_sheets: int = 0) -> bytes:
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    for row in rows:
        sheet.append(row)
    for _ in range(more_sheets):
        book.create_sheet().append(["something else"])
    content = BytesIO()
    book.save(content)
    return content.getvalue()


def test_values_read_as_they_were_typed() -> None:
    content = workbook(
        [["a", 7, 7.1, 738.0000000000001, True, date(2026, 3, 2), datetime(2026, 3, 2, 14, 5), None, "z"]]
    )

    (row,) = first_sheet("tours.xlsx", content)

    assert row == ("a", "7", "7.1", "738.0000000000001", "yes", "2026-03-02", "2026-03-02T14:05:00", "", "z")


def test_only_the_first_sheet_is_read() -> None:
    rows = list(first_sheet("tours.xlsx", workbook([["walk"], ["return"]], more_sheets=2)))

    assert rows == [("walk",), ("return",)]


def test_a_formula_that_nobody_computed_reads_as_nothing() -> None:
    rows = list(first_sheet("tours.xlsx", workbook([["walk", "minutes"], ["return", "=1+1"]])))

    assert rows[1] == ("return", "")


def test_what_is_no_workbook_is_refused_with_what_would_do() -> None:
    with pytest.raises(InputRefused, match=r"tours.xlsx: .*; give a workbook \(.xlsx\) or a CSV file in UTF-8"):
        list(first_sheet("tours.xlsx", b"walk,minutes\nreturn,7.1\n"))


def test_the_command_gives_the_same_record_for_a_workbook_and_for_csv(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    book, table = tmp_path / "tours.xlsx", tmp_path / "tours.csv"
    book.write_bytes(workbook(ROWS))
    table.write_text("\n".join(",".join(str(value) for value in row) for row in ROWS) + "\n")
    records = []
    for path in (book, table):
        wish = ["decompose", str(path), "--response", "minutes", "--factor", "walk", "--factor", "start", "--json"]
        assert main(wish) == 0
        records.append(json.loads(capsys.readouterr().out))

    # A workbook keeps 20 where the table says 20.0; both lie on the same step.
    assert records[0] == records[1]


def test_a_fault_in_a_workbook_is_told_with_its_row(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "tours.xlsx"
    path.write_bytes(workbook([*ROWS, ["return", "front", "fast"]]))

    assert main(["decompose", str(path), "--response", "minutes", "--factor", "walk"]) == 1
    assert f"tours.xlsx, line {len(ROWS) + 1}, column minutes: 'fast' given" in capsys.readouterr().err


def test_a_workbook_is_taken_into_a_study(database: Database) -> None:
    place = a_study(database)
    job = read_upload(database, place.keeper, place.study_id, name="tours.xlsx", content=workbook(ROWS), now=NOW)
    choices = [ColumnChoice("factor", "walk"), ColumnChoice("factor", "start"), ColumnChoice("response", "minutes")]

    run_import(database, place.keeper, place.study_id, job, choices=choices, round_offered=False, now=NOW)

    report = study_report(database, place.keeper, place.study_id)
    assert report.findings is not None
    assert report.findings.table.grand.value.value == pytest.approx(20.1)
    assert report.card.logged == len(ROWS) - 1
