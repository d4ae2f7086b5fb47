"""A workbook's first sheet reads as what people see in it, and gives the same answers as the same table as CSV."""

from __future__ import annotations

import json
from collections.abc import Sequence
from datetime import date, datetime, time, timedelta
from io import BytesIO
from pathlib import Path

import pytest
from openpyxl import Workbook
from sqlalchemy import select

from registry.cli import main
from registry.errors import InputRefused
from registry.exchange.workbooks import first_sheet
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.study_report import study_report
from registry.services.trial_import import read_upload, run_import
from registry.services.trial_pages import trial_detail
from registry.storage.tables import ImportJob
from tests.support.studies import NOW, START, WALK, a_study

ROWS: list[list[object]] = [
    ["walk", "start", "minutes"],
    *[[walk, start, 20 + at / 10] for at in range(3) for walk in WALK.levels for start in START.levels],
]


def workbook(rows: Sequence[Sequence[object]], *, more_sheets: int = 0) -> bytes:
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
    at = datetime(2026, 3, 2, 14, 5)  # noqa: DTZ001 - a workbook keeps no zone.
    content = workbook([["a", 7, 7.1, 738.0000000000001, True, date(2026, 3, 2), at, None, "z"]])

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


def test_times_of_day_and_spans_read_as_clocks_show_them() -> None:
    content = workbook([["a", time(14, 5), timedelta(hours=1, minutes=30), datetime(2026, 3, 2, 14, 5, 30)]])  # noqa: DTZ001

    assert list(first_sheet("tours.xlsx", content)) == [("a", "14:05:00", "1:30:00", "2026-03-02T14:05:30")]


@pytest.mark.parametrize(
    ("number", "text"),
    [(-3, "-3"), (0, "0"), (0.1, "0.1"), (1e-7, "1e-07"), (123456.789, "123456.789"), (2**53 - 1, "9007199254740991"),
     (1e20, "1e+20")],
)  # fmt: skip
def test_a_number_reads_as_the_shortest_text_of_the_same_number(number: float, text: str) -> None:
    assert list(first_sheet("tours.xlsx", workbook([["a", number]]))) == [("a", text)]


def test_a_number_kept_as_text_stays_as_it_was_typed() -> None:
    assert list(first_sheet("tours.xlsx", workbook([["007", "7.10", " 1,5 "]]))) == [("007", "7.10", " 1,5 ")]


def test_empty_cells_and_rows_keep_their_places() -> None:
    rows: list[list[object]] = [
        ["walk", "minutes", "note"], ["return", None, "late"], [None, None, None], [None, 7.1, None],
    ]  # fmt: skip

    assert list(first_sheet("tours.xlsx", workbook(rows))) == [
        ("walk", "minutes", "note"), ("return", "", "late"), ("", "", ""), ("", "7.1", ""),
    ]  # fmt: skip


def test_a_table_that_begins_further_in_keeps_the_rows_and_columns_of_its_sheet() -> None:
    rows: list[list[object]] = [[], [], [None, "walk"], [None, "return"]]

    assert list(first_sheet("tours.xlsx", workbook(rows))) == [("", ""), ("", ""), ("", "walk"), ("", "return")]


def test_the_first_sheet_is_the_leftmost_one_whatever_was_looked_at_last() -> None:
    book = Workbook()
    book.active.append(["left"])
    book.create_sheet("Right").append(["right"])
    book.active = 1
    content = BytesIO()
    book.save(content)

    assert list(first_sheet("tours.xlsx", content.getvalue())) == [("left",)]


@pytest.mark.parametrize("kept", [4, 900, -30])
def test_a_workbook_broken_off_is_refused_and_nothing_is_kept(sqlite: Database, kept: int) -> None:
    place = a_study(sqlite)
    content = workbook(ROWS)[:kept]

    with pytest.raises(InputRefused, match=r"^tours.xlsx: ") as refusal:
        read_upload(sqlite, place.keeper, place.study_id, name="tours.xlsx", content=content, now=NOW)

    assert refusal.value.faults[0].field == "file"
    with sqlite.read() as session:
        assert session.scalars(select(ImportJob)).all() == []


def test_a_formula_nobody_computed_is_a_row_without_a_reading(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "tours.xlsx"
    path.write_bytes(workbook([*ROWS, ["return", "front", "=C2"]]))

    assert main(["decompose", str(path), "--response", "minutes", "--factor", "walk", "--json"]) == 0

    record = json.loads(capsys.readouterr().out)
    assert record["trials"] == len(ROWS) - 1
    assert "1 row has no reading and is left out" in record["notes"]


def test_dates_of_a_workbook_are_the_sites_own_clock_and_faults_name_its_rows(database: Database) -> None:
    place = a_study(database)
    heads = ["walk", "start", "minutes", "when"]
    good = workbook(
        [
            heads,
            ["return", "back", 7, datetime(2026, 2, 2, 14, 5)],  # noqa: DTZ001 - A sheet knows no zone.
            ["return", "back", 7.1, date(2026, 2, 3)],
        ]
    )
    bad = workbook([heads, [None] * 4, ["return", "back", "fast", None], ["zigzag", "back", 7.25, None]])
    choices = [ColumnChoice("factor", "walk"), ColumnChoice("factor", "start"), ColumnChoice("response", "minutes"),
               ColumnChoice("happened_at")]  # fmt: skip
    jobs = [
        read_upload(database, place.keeper, place.study_id, name="tours.xlsx", content=content, now=NOW)
        for content in (good, bad)
    ]

    run_import(database, place.keeper, place.study_id, jobs[0], choices=choices, round_offered=False, now=NOW)
    with pytest.raises(InputRefused) as refusal:
        run_import(database, place.keeper, place.study_id, jobs[1], choices=choices, round_offered=False, now=NOW)

    trials = [trial_detail(database, place.keeper, place.study_id, number).trial for number in (1, 2)]
    # Copenhagen is an hour ahead of UTC in winter.
    assert [trial.happened_at.isoformat() for trial in trials] == [
        "2026-02-02T13:05:00+00:00", "2026-02-02T23:00:00+00:00",
    ]  # fmt: skip
    assert [trial.readings[0].text for trial in trials] == ["7.0", "7.1"]
    assert [fault.where for fault in refusal.value.faults] == [
        "line 3, column minutes", "line 4, column walk", "line 4, column minutes",
    ]  # fmt: skip


def test_a_value_in_the_farthest_corner_is_refused_before_the_sheet_is_opened() -> None:
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet["A1"], sheet["XFD1048576"] = "walk", 1
    content = BytesIO()
    book.save(content)

    with pytest.raises(InputRefused, match="a sheet reaches to column 16384 and row 1048576; clear what lies far from"):
        list(first_sheet("far.xlsx", content.getvalue()))


def test_blank_rows_are_not_rows_wherever_they_stand(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rows: list[list[object]] = [[None, None], ["walk", "minutes"], ["a", 1], [None, None], ["b", 2], ["a", 2], ["b", 4]]
    book, table = tmp_path / "tours.xlsx", tmp_path / "tours.csv"
    book.write_bytes(workbook(rows))
    table.write_text("\n".join(",".join("" if value is None else str(value) for value in row) for row in rows) + "\n")
    records = []
    for path in (book, table):
        assert main(["decompose", str(path), "--response", "minutes", "--factor", "walk", "--json"]) == 0
        records.append(json.loads(capsys.readouterr().out))

    assert records[0] == records[1]
    assert not any("left out" in note for note in records[0]["notes"])
