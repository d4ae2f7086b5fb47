"""The report on a study rests on its tallies alone, the same on both databases."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from registry.errors import NotFound
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study
from registry.services.study_report import report_record, study_report
from registry.services.trial_import import read_upload, run_import
from tests.support.studies import (
    MINUTES,
    NOW,
    SHIFT,
    START,
    WALK,
    FactorDraft,
    Place,
    ResponseDraft,
    a_keeper,
    a_study,
    another_study,
)
from tests.support.tables import REFERENCE, log_relative_error

NIST = tuple(sorted(path.stem for path in (REFERENCE / "nist_strd").glob("*.csv")))
CERTIFIED: dict[str, Any] = json.loads((REFERENCE / "nist_strd" / "certified.json").read_text())


def entered(database: Database, path: Path) -> dict[str, Any]:
    """Enter a one-way set through the registry, and give the record of its report."""
    with path.open(newline="") as file:
        rows = list(csv.DictReader(file))
    places = max(len(row["y"].partition(".")[2]) for row in rows)
    levels = tuple(dict.fromkeys(row["group"] for row in rows))
    response = ResponseDraft("y", "", "unit", f"1e-{places}", "", "none", "measured", "primary")
    place = a_study(database, factors=(FactorDraft("group", "treatment", levels),), responses=(response,))
    job = read_upload(database, place.keeper, place.study_id, name=path.name, content=path.read_bytes(), now=NOW)
    choices = [ColumnChoice("factor", "group"), ColumnChoice("response", "y")]
    run_import(database, place.keeper, place.study_id, job, choices=choices, round_offered=False, now=NOW)
    return report_record(study_report(database, place.keeper, place.study_id))


@pytest.mark.parametrize("name", NIST)
def test_nist_sets_entered_through_the_registry_are_bit_identical_on_both_databases(
    name: str, make_database: Callable[[str], Database]
) -> None:
    path = REFERENCE / "nist_strd" / f"{name}.csv"

    records = [entered(make_database(dialect), path) for dialect in ("sqlite", "postgresql")]

    texts = [json.dumps({key: record[key] for key in record if key != "study"}) for record in records]
    assert texts[0] == texts[1]
    line, certified = records[0]["terms"][0]["equal_weight"], CERTIFIED[name]["certified"]
    assert log_relative_error(line["f"], certified["f"]) >= 14.0
    assert log_relative_error(records[0]["residual"]["sd"], certified["residual_sd"]) >= 14.0


def filled(database: Database, *, per_cell: int = 3, plan: bool = True) -> Place:
    """Make a study in which the return walk takes 2 minutes more than the others, and fill it."""
    keeper = a_keeper(database)
    from registry.services.series_pages import SeriesDraft, new_series

    series_id = new_series(database, keeper, SeriesDraft("Pick tours", ""), now=NOW)
    study_id = another_study(database, keeper, series_id, factors=(WALK, START), started=False)
    if plan:
        lock_plan(database, keeper, study_id, PlanDraft(str(per_cell)), now=NOW)
    start_study(database, keeper, study_id, now=NOW)
    place = Place(database, keeper, series_id, study_id)
    key = 0
    for turn in range(per_cell):
        for walk in WALK.levels:
            for start in START.levels:
                key += 1
                minutes = 20 + 2 * (walk == "return") + 0.1 * ((key * 7 + turn) % 5 - 2)
                place.log({"walk": walk, "start": start}, {"minutes": f"{minutes:.1f}"}, key=key)
    return place


def test_a_study_closed_at_its_planned_size_speaks_in_findings(database: Database) -> None:
    place = filled(database)
    close_study(database, place.keeper, place.study_id, reason="size_reached", note="", now=NOW)

    report = study_report(database, place.keeper, place.study_id)

    assert report.judged
    assert report.sentences[0] == "18 of 18 planned trials are logged; 18 readings of minutes count."
    assert report.sentences[2].startswith(
        "The best seen of 6 combinations is serpentine, front; 3 others cannot be ruled"
    )
    assert report.headline == report.sentences[2]
    assert report.sentences[3] == (
        "walk return takes 1.97 min more than serpentine (1.72 to 2.22), averaged over start: worth acting on."
    )
    assert report.findings is not None
    assert {line.code for line in report.findings.differences} == {"act", "small"}


@pytest.mark.parametrize("way", ["running", "early", "no plan"])
def test_no_finding_is_given_where_an_ordinary_interval_promises_too_much(database: Database, way: str) -> None:
    place = filled(database, plan=way != "no plan")
    if way != "running":
        close_study(database, place.keeper, place.study_id, reason="early", note="hall needed", now=NOW)

    report = study_report(database, place.keeper, place.study_id)

    assert not report.judged
    assert report.why_not_judged
    assert report.findings is not None
    assert {line.code for line in report.findings.differences} == {None}
    assert not any("worth acting on" in sentence for sentence in report.sentences)


def test_every_mean_of_the_build_up_is_the_sum_of_its_parts(database: Database) -> None:
    place = filled(database)

    report = study_report(database, place.keeper, place.study_id)

    assert report.findings is not None
    table = report.findings.table
    for cell in [*(cell for row in table.cells for cell in row), *table.row_means, *table.column_means]:
        parts = [part.offset.value.value for part in cell.parts]
        assert table.grand.value.value + sum(parts) == pytest.approx(cell.mean.value.value, rel=1e-12)  # type: ignore[operator, arg-type]


def test_a_block_is_allowed_for_and_not_crossed(database: Database) -> None:
    place = a_study(database, factors=(WALK, START, SHIFT))
    key = 0
    for walk in WALK.levels:
        for start in START.levels:
            for shift in SHIFT.levels:
                key += 1
                place.log({"walk": walk, "start": start, "shift": shift}, {"minutes": f"{20 + key / 10:.1f}"}, key=key)

    report = study_report(database, place.keeper, place.study_id)

    assert report.findings is not None
    assert [line.role for line in report.findings.sources] == ["block", "treatment", "treatment", "treatment"]
    assert [line.n for line in report.findings.cells] == [2] * 6


def test_a_study_without_readings_says_so(database: Database) -> None:
    place = a_study(database)

    report = study_report(database, place.keeper, place.study_id)

    assert report.findings is None
    assert report.sentences == ("No reading of minutes counts yet.",)
    assert report_record(report)["study"]["logged"] == 0


def test_an_unknown_response_is_refused_with_those_there_are(sqlite: Database) -> None:
    place = a_study(sqlite, responses=(MINUTES,))

    with pytest.raises(NotFound, match="this study has no response 'metres'; its responses are minutes"):
        study_report(sqlite, place.keeper, place.study_id, response="metres")
