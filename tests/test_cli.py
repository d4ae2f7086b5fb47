"""The command answers as people script against it, and refuses in one clear line."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from registry.cli import main
from registry.services.opening import Database
from registry.storage.engine import open_database
from tests.support.studies import a_study
from tests.support.tables import REFERENCE, log_relative_error

CERTIFIED: dict[str, Any] = json.loads((REFERENCE / "nist_strd" / "certified.json").read_text())


def decomposed(capsys: pytest.CaptureFixture[str], path: Path, *options: str) -> dict[str, Any]:
    assert main(["decompose", str(path), *options, "--json"]) == 0
    record: dict[str, Any] = json.loads(capsys.readouterr().out)
    return record


@pytest.mark.parametrize("name", list(CERTIFIED))
def test_all_nist_sets_agree_to_fourteen_digits(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    # NIST Statistical Reference Datasets, analysis of variance; certified values to 15 digits.
    record = decomposed(capsys, REFERENCE / "nist_strd" / f"{name}.csv", "--response", "y", "--factor", "group")

    certified, line = CERTIFIED[name]["certified"], record["terms"][0]["equal_weight"]
    agreements = {
        "f": log_relative_error(line["f"], certified["f"]),
        "ss": log_relative_error(line["ss"], certified["ss_between"]),
        "ms": log_relative_error(line["ms"], certified["ms_between"]),
        "ss within": log_relative_error(record["residual"]["ss"], certified["ss_within"]),
        "ms within": log_relative_error(record["residual"]["ms"], certified["ms_within"]),
        "r squared": log_relative_error(record["r_squared"], certified["r_squared"]),
        "sd": log_relative_error(record["residual"]["sd"], certified["residual_sd"]),
    }
    assert min(agreements.values()) >= 14.0, agreements
    assert record["terms"][0]["sequential"] == record["terms"][0]["hierarchical"] == line
    assert (record["trials"], record["terms"][0]["df"]) == (CERTIFIED[name]["trials"], certified["df_between"])


def test_the_record_has_every_entry_of_its_format(capsys: pytest.CaptureFixture[str]) -> None:
    record = decomposed(
        capsys,
        REFERENCE / "factorial" / "moore.csv",
        "--response",
        "y",
        "--factor",
        "fcategory",
        "--factor",
        "partner_status",
    )

    assert record["format"] == "weftbook.decomposition/1"
    assert {"response", "trials", "step", "balance", "error", "grand_mean", "cells", "terms", "residual", "total",
            "r_squared", "marginal_means", "comparisons", "simple_effects", "notes"} <= set(record)  # fmt: skip
    assert (record["step"], record["balance"], record["error"]) == ("1", "unbalanced", "pooled")
    assert [line["factors"] for line in record["terms"]] == [
        ["fcategory"], ["partner_status"], ["fcategory", "partner_status"],
    ]  # fmt: skip
    assert {"per_cell", "partial_eta_squared", "omega_squared", "offsets"} <= set(record["terms"][0])
    assert "unreplicated" not in record
    assert set(record["comparisons"][0]) == {
        "factor", "from", "to", "difference", "se", "df", "p_unadjusted", "tukey_kramer", "games_howell",
    }  # fmt: skip


def test_a_report_without_json_reads_from_the_answer_to_the_table(capsys: pytest.CaptureFixture[str]) -> None:
    path = REFERENCE / "factorial" / "npk.csv"

    code = main(
        [
            "decompose",
            str(path),
            "--response",
            "y",
            "--factor",
            "N",
            "--factor",
            "P",
            "--factor",
            "K",
            "--block",
            "block",
        ]
    )

    out = capsys.readouterr().out
    assert code == 0
    assert out.startswith("y by N × P × K: 24 trials, balanced, in steps of 0.1.")
    assert "The widest difference: N 1 is 5.617 above 0" in out
    assert "- N × P × K: aliased with blocks" in out


@pytest.mark.parametrize(
    ("content", "options", "said"),
    [
        ("walk,minutes\na,1\nb,2\n", ["--response", "hours"], "its columns are 'walk', 'minutes'"),
        ("walk,minutes\na,1\n,2\n", [], "line 3, column walk: no level given"),
        ("walk,minutes\na,1\nb,1e400\n", [], "line 3, column minutes: '1e400' given"),
        ("walk,minutes\na,1\nb,NaN\n", [], "line 3, column minutes: 'NaN' given"),
        ('walk,minutes\na,1\nb,"1,5"\n', [], "line 3, column minutes: '1,5' given; write a decimal point: 1.5"),
        ("walk,minutes\na,1\nb,12.34\n", ["--step", "0.1"], "line 3, column minutes: '12.34' lies between two steps"),
        ("walk,minutes\na,1\nb\n", [], "line 3: 1 values given; give 2"),
        ("walk,minutes\n", [], "it has heads and no rows"),
        ("", [], "there is nothing in it"),
        ("walk,walk,minutes\na,a,1\n", [], "column 'walk': 2 columns have this head"),
        ("walk,minutes\na,1\na,2\n", [], "column walk: every row has 'a'"),
        ("walk,minutes\na,\nb,\n", [], "column minutes: no row has a reading"),
        ('walk,minutes\na,"1\n', [], "check the quotes"),
    ],
)  # fmt: skip
def test_bad_input_is_refused_in_one_line_that_says_where(
    content: str, options: list[str], said: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "tours.csv"
    path.write_text(content)
    options = options if "--response" in options else [*options, "--response", "minutes"]

    code = main(["decompose", str(path), "--factor", "walk", *options])

    err = capsys.readouterr().err
    assert code == 1
    assert err.count("\n") == 1
    assert said in err


@pytest.mark.parametrize("name", ["C", "Q", "id", "select", 'a, "b"', "🚚 route", "x" * 200, "y ~ a"])
def test_a_column_may_have_any_name(name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    quoted = '"' + name.replace('"', '""') + '"'
    path = tmp_path / "tours.csv"
    path.write_text(
        f'\ufeff{quoted},minutes\r\n"one, two",1\r\nthree,2\r\n"one, two",3\r\nthree,\r\n', encoding="utf-8"
    )

    record = decomposed(capsys, path, "--response", "minutes", "--factor", name)

    assert record["terms"][0]["factors"] == [name]
    assert [cell["levels"][name] for cell in record["cells"]] == ["one, two", "three"]
    assert any(note.startswith("1 row has no reading") for note in record["notes"])


def test_a_file_that_is_not_utf_8_is_refused_with_its_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "tours.csv"
    path.write_bytes(b"walk,minutes\n" + b"return,7.1\n" * 20_000 + b"r\xe9turn,7.1\n")

    assert main(["decompose", str(path), "--response", "minutes", "--factor", "walk"]) == 1
    assert "tours.csv, line 20002: it is not text in UTF-8" in capsys.readouterr().err


@pytest.mark.parametrize("text", [".25", "-0.25", "\N{MINUS SIGN}0.25", "25e-2", "+0.25"])
def test_the_step_is_read_off_however_a_number_is_written(
    text: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "tours.csv"
    path.write_text(f"walk,minutes\na,1\nb,{text}\na,2\nb,3\n", encoding="utf-8")

    assert decomposed(capsys, path, "--response", "minutes", "--factor", "walk")["step"] == "0.01"


def test_recount_names_what_is_wrong_and_exits_with_one(
    sqlite: Database, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    place = a_study(sqlite)
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    monkeypatch.setenv("WEFTBOOK_DATABASE_URL", sqlite.engine.url.render_as_string(hide_password=False))

    assert main(["recount"]) == 0
    assert "Every tally and every event chain is right: 1 study recounted." in capsys.readouterr().out
    with sqlite.write() as session:
        session.connection().exec_driver_sql("UPDATE tally SET n = 2")
    assert main(["recount"]) == 1
    assert "minutes, walk return, start back: the tally says n 2" in capsys.readouterr().err


def test_upgrade_makes_the_tables_and_serve_needs_a_secret(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setenv("WEFTBOOK_DATABASE_URL", f"sqlite:///{tmp_path / 'new.db'}")
    monkeypatch.delenv("WEFTBOOK_SECRET", raising=False)

    assert main(["upgrade"]) == 0
    assert main(["serve"]) == 1
    assert "WEFTBOOK_SECRET: not set; set it to at least 32 random characters" in capsys.readouterr().err
    open_database(f"sqlite:///{tmp_path / 'new.db'}").dispose()


def test_a_term_that_runs_with_the_blocks_is_aliased_and_nothing_is_made_of_it(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "nested.csv"
    rows = [f"{'early' if a == 'x' else 'late'},{a},{b},{10 + at}" for at in range(3) for a in "xy" for b in "pq"]
    path.write_text("shift,a,b,minutes\n" + "\n".join(rows) + "\n")
    options = ("--response", "minutes", "--factor", "a", "--factor", "b", "--block", "shift")

    record = decomposed(capsys, path, *options)

    aliased = record["comparisons"][0]
    assert (aliased["factor"], aliased["difference"], aliased["tukey_kramer"]["p"]) == ("a", None, None)
    means = [mean["equal_weight"]["estimate"] for mean in record["marginal_means"] if "a" in mean["levels"]]
    assert means
    assert set(means) == {None}
    assert "a: aliased with blocks" in record["notes"]
    assert main(["decompose", str(path), *options]) == 0


def test_an_answer_that_cannot_be_written_is_told(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "tours.csv"
    path.write_text("walk,minutes\na,1\nb,2\na,2\nb,4\n")
    wish = ["decompose", str(path), "--response", "minutes", "--factor", "walk"]
    code = f"import sys; from registry.cli import main; sys.exit(main({wish!r}))"

    with Path("/dev/full").open("w") as full:
        done = subprocess.run([sys.executable, "-c", code], stdout=full, stderr=subprocess.PIPE, text=True, check=False)

    assert done.returncode == 1
    assert done.stderr == "weftbook: output: No space left on device; nothing was answered\n"


def test_a_device_is_no_table(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["decompose", "/dev/zero", "--response", "y", "--factor", "a"]) == 1
    assert "/dev/zero: it is a device; give the path of a CSV file or workbook" in capsys.readouterr().err


def test_a_file_that_is_no_database_is_refused_in_one_line(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "not.db"
    path.write_bytes(b"this is no database" * 100)
    monkeypatch.setenv("WEFTBOOK_DATABASE_URL", f"sqlite:///{path}")

    for command in ("recount", "upgrade"):
        assert main([command]) == 1
        error = capsys.readouterr().err
        assert "database: file is not a database" in error
        assert error.count("\n") == 1


@pytest.mark.parametrize("port", ["99999", "-1", "http"])
def test_a_port_that_is_none_is_wrong_usage(port: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as stopped:
        main(["demo", "--port", port])
    assert stopped.value.code == 2
    assert "give a whole number from 0 to 65535" in capsys.readouterr().err


def test_a_demo_folder_that_cannot_be_made_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    taken = tmp_path / "taken"
    taken.write_text("a file")

    assert main(["demo", "--no-browser", "--port", "0", "--at", str(taken)]) == 1
    assert "--at: " in capsys.readouterr().err


def test_wrong_usage_exits_with_two(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as stop:
        main(["decompose"])

    assert stop.value.code == 2
    assert "usage: weftbook decompose" in capsys.readouterr().err
