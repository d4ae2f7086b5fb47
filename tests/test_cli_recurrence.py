"""`weftbook recurrence` answers as people script against it, and refuses in one clear line."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from random import Random
from typing import Any

import pytest
import statsmodels.formula.api as smf
from pandas import DataFrame

from registry.cli import main

ASKED = ("--study", "study", "--response", "minutes", "--factor", "walk", "--factor", "start")
EFFECTS = {"2025 Q4": 2.0, "2026 Q1": 2.2, "2026 Q2": 1.9}


def trials(effects: dict[str, float], *, walks: dict[str, tuple[str, ...]] | None = None) -> list[dict[str, str]]:
    """Draw trials of several studies; the interaction of return and back is as stated."""
    rng = Random(7)
    return [
        {
            "study": study,
            "walk": walk,
            "start": start,
            "shift": ("early", "late")[turn % 2],
            "minutes": f"{20 + (effect if (walk, start) == ('return', 'back') else 0) + rng.gauss(0, 0.5):.1f}",
        }
        for study, effect in effects.items()
        for walk in (walks or {}).get(study, ("serpentine", "return"))
        for start in ("front", "back")
        for turn in range(8 + rng.randrange(3))
    ]


def table(folder: Path, rows: list[dict[str, str]]) -> Path:
    path = folder / "tours.csv"
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, list(rows[0]))
        writer.writeheader()
        writer.writerows(rows)
    return path


def board(capsys: pytest.CaptureFixture[str], path: Path, *options: str) -> dict[str, Any]:
    assert main(["recurrence", str(path), *ASKED, "--margin", "0.8", *options, "--json"]) == 0
    record: dict[str, Any] = json.loads(capsys.readouterr().out)
    return record


def test_the_record_has_every_entry_of_its_format(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = board(capsys, table(tmp_path, trials(EFFECTS)))

    assert (record["format"], record["count_confidence"], record["combiner"]) == (
        "weftbook.recurrence/1", 0.95, "fisher",
    )  # fmt: skip
    (found,) = record["interactions"]
    assert (found["factors"], found["levels"]) == (["walk", "start"], [["serpentine", "return"], ["front", "back"]])
    assert (found["verdict"], found["words"]) == ("seen_again", "seen again")
    assert found["at_least"] == {"up": 3, "down": 0, "nil": 0}
    assert [each["study"] for each in found["each"]] == list(EFFECTS)
    assert {"estimate", "se", "df", "p_up", "p_down"} <= set(found["each"][0])
    assert {"estimate", "lower", "upper", "tau_squared"} <= set(found["pooled"])
    assert found["sentence"].startswith("At least 3 of 3 studies show it, in the same direction.")
    assert (found["tags"], record["notes"]) == ([], [])


def test_each_study_agrees_with_a_row_wise_least_squares_fit(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    # statsmodels' least squares on the rows of each study, 0/1 coded: the product is the difference of differences.
    rows = trials(EFFECTS)
    record = board(capsys, table(tmp_path, rows))

    for each in record["interactions"][0]["each"]:
        frame = DataFrame(
            [
                {
                    "y": float(row["minutes"]),
                    "a": int(row["walk"] == "return"),
                    "b": int(row["start"] == "back"),
                }
                for row in rows
                if row["study"] == each["study"]
            ]
        )
        frame["ab"] = frame["a"] * frame["b"]
        fit = smf.ols("y ~ a + b + ab", frame).fit()
        assert each["estimate"] == pytest.approx(fit.params["ab"], rel=1e-9)
        assert each["se"] == pytest.approx(fit.bse["ab"], rel=1e-9)
        assert each["df"] == fit.df_resid


def test_blocks_are_allowed_for_and_each_its_own_spread_can_be_asked_for(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = table(tmp_path, trials(EFFECTS))

    pooled, own, blocked = (
        board(capsys, path, *options)["interactions"][0]["each"][0]
        for options in ((), ("--error", "per-cell"), ("--block", "shift"))
    )

    assert own["estimate"] == pooled["estimate"]
    assert own["df"] < pooled["df"]
    assert blocked["df"] == pooled["df"] - 1


def test_a_held_factor_and_corners_nobody_has_are_noted(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    walks = {"2025 Q4": ("return",), "2026 Q1": ("serpentine", "largest gap")}
    record = board(capsys, table(tmp_path, trials(EFFECTS, walks=walks)))

    assert record["notes"] == [
        "2025 Q4: walk was held at return",
        (
            "walk × start: (largest gap \N{MINUS SIGN} return) at back less at front: left out, because no study has"
            " all four corners"
        ),
    ]
    assert [each["verdict"] for each in record["interactions"]] == ["single", "single"]


def test_a_report_without_json_gives_the_verdict_before_the_numbers(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["recurrence", str(table(tmp_path, trials(EFFECTS))), *ASKED, "--margin", "0.8"]) == 0

    lines = capsys.readouterr().out.splitlines()
    assert lines[0] == "Interactions in minutes across studies; margin that matters 0.8"
    assert lines[2] == "walk × start: (return \N{MINUS SIGN} serpentine) at back less at front"
    assert lines[3].startswith("  seen again: At least 3 of 3 studies show it")
    assert [line.split("  ")[2].strip() for line in lines[4:8]] == [*EFFECTS, "all together"]


@pytest.mark.parametrize(
    ("options", "told"),
    [
        (("--margin", "0"), "--margin: 0 given; give a number above 0, in units of the response"),
        (("--margin", "wide"), "'wide' given"),
        (("--margin", "0.8", "--fdr", "5"), "--fdr: 5.0 given; give a number between 0 and 1, as 0.05"),
        (("--margin", "0.8", "--block", "crew"), "column 'crew': there is no such column"),
        (("--margin", "0.8", "--factor", "walk"), "columns: 'walk' is named twice"),
    ],
)
def test_bad_input_is_refused_in_one_line(
    options: tuple[str, ...], told: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["recurrence", str(table(tmp_path, trials(EFFECTS))), *ASKED, *options]) == 1

    error = capsys.readouterr().err
    assert told in error
    assert error.count("\n") == 1


def test_one_factor_alone_has_no_interaction(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = table(tmp_path, trials(EFFECTS))
    wish = ["recurrence", str(path), "--study", "study", "--response", "minutes", "--factor", "walk", "--margin", "1"]

    assert main(wish) == 1
    assert "--factor: 1 given; name at least two, an interaction has two" in capsys.readouterr().err


def test_a_row_without_a_study_is_refused_with_its_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rows = trials(EFFECTS)
    rows[2]["study"] = " "

    assert main(["recurrence", str(table(tmp_path, rows)), *ASKED, "--margin", "1"]) == 1
    assert "tours.csv, line 4, column study: no level given; give one" in capsys.readouterr().err
