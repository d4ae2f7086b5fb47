"""`weftbook pool` answers as people script against it, and refuses in one clear line."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from registry.cli import main

META = Path(__file__).parent / "reference" / "meta"


def pooled(capsys: pytest.CaptureFixture[str], path: Path, *options: str) -> dict[str, Any]:
    assert main(["pool", str(path), *options, "--json"]) == 0
    record: dict[str, Any] = json.loads(capsys.readouterr().out)
    return record


def test_the_record_has_every_entry_of_its_format(capsys: pytest.CaptureFixture[str]) -> None:
    record = pooled(capsys, META / "bcg.csv")

    assert list(record) == [
        "format", "studies", "method", "interval", "estimate", "se", "df", "lower", "upper", "p", "tau_squared",
        "i_squared", "q", "prediction", "each", "leave_one_out", "notes",
    ]  # fmt: skip
    assert (record["format"], record["studies"]) == ("weftbook.pooled/1", 13)
    assert (record["method"], record["interval"]) == ("paule-mandel", "hartung-knapp")
    # tests/reference/meta/bcg.json: Paule-Mandel with the floored interval.
    expected = json.loads((META / "bcg.json").read_text(encoding="utf-8"))["pooled"]["paule-mandel"]
    assert record["estimate"] == pytest.approx(expected["estimate"], rel=1e-8)
    assert record["lower"] == pytest.approx(expected["hartung_knapp_floored"]["lower"], rel=1e-8)
    assert sum(each["weight"] for each in record["each"]) == pytest.approx(1.0)
    assert [left["without"] for left in record["leave_one_out"]] == [each["study"] for each in record["each"]]


def test_a_standard_error_does_for_a_variance(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    variances, errors = tmp_path / "v.csv", tmp_path / "se.csv"
    variances.write_text("study,effect,variance\nA,2.1,0.64\nB,3.4,0.81\nC,1.2,0.49\n")
    errors.write_text("se,study,effect\n0.8,A,2.1\n0.9,B,3.4\n0.7,C,1.2\n")

    first, second = pooled(capsys, variances), pooled(capsys, errors)

    assert first == second
    # Method sheet 7.4, small check; at three studies the prediction comes with a warning.
    assert first["tau_squared"]["estimate"] == pytest.approx(0.561008, abs=5e-7)
    assert first["notes"] == ["three studies: the prediction rests on one degree of freedom and is very wide"]


@pytest.mark.parametrize(
    ("options", "undefined"),
    [(("--method", "common"), ("prediction",)), (("--interval", "normal"), ("df",)), (("--no-floor",), ())],
)
def test_what_a_choice_leaves_undefined_is_null(
    options: tuple[str, ...], undefined: tuple[str, ...], capsys: pytest.CaptureFixture[str]
) -> None:
    record = pooled(capsys, META / "bcg.csv", *options)

    assert [name for name, value in record.items() if value is None] == list(undefined)


def test_one_and_two_studies_say_what_they_cannot(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "effects.csv"
    path.write_text("study,effect,se\nA,2.1,0.8\n")
    one = pooled(capsys, path)
    path.write_text("study,effect,se\nA,2.1,0.8\nB,2.3,0.7\n")
    two = pooled(capsys, path)

    assert (one["estimate"], one["lower"], one["leave_one_out"]) == (2.1, None, [])
    assert "interval: one study cannot show how studies differ" in one["notes"]
    assert (two["prediction"], two["tau_squared"]["estimate"]) == (None, 0.0)
    assert two["notes"] == ["prediction: a prediction needs three studies"]


def test_a_report_without_json_gives_the_answer_first(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["pool", str(META / "bcg.csv")]) == 0

    lines = capsys.readouterr().out.splitlines()
    assert lines[0] == ("Together 13 studies say \N{MINUS SIGN}0.715 (\N{MINUS SIGN}1.109 to \N{MINUS SIGN}0.3208).")
    assert lines[1] == "True effects differ between studies with a standard deviation of 0.564."
    assert lines[5].startswith("Aronson 1948")


@pytest.mark.parametrize(
    ("content", "told"),
    [
        ("", "there is nothing in it; give a table; its columns are study, effect, and variance or se"),
        ("study,effect\nA,1\n", "column 'se': there is no such column; its columns are study, effect, and variance"),
        ("study,effect,se\n", "it has heads and no rows"),
        ("study,effect,se\nA,1,0\n", "line 2, column se: 0 given; give a number above 0"),
        ("study,effect,variance\nA,1,1\nB,2,-1\n", "line 3, column variance: -1 given; give a number above 0"),
        ("study,effect,se\nA,x,1\n", "line 2, column effect: 'x' given"),
        ("study,effect,se\nA,1,1\nA,2,1\n", "line 3, column study: 'A' stands there already; give each study one row"),
        ("study,effect,se\n,1,1\n", "line 2, column study: nothing given; name the study"),
        ("study,effect,se\nA,1\n", "line 2: 2 values given; give 3, one for every head"),
    ],
)
def test_bad_input_is_refused_in_one_line(
    content: str, told: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "effects.csv"
    path.write_text(content)

    assert main(["pool", str(path)]) == 1

    error = capsys.readouterr().err
    assert told in error
    assert error.count("\n") == 1


def test_a_file_that_is_not_there_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["pool", str(tmp_path / "no.csv")]) == 1
    assert "there is no such file; give the path of a CSV file or workbook" in capsys.readouterr().err
