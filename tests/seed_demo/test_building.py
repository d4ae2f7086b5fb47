"""The demo holds what it says is true, and the registry finds it."""

from __future__ import annotations

from datetime import UTC, datetime

import pytest

from registry.services.opening import Database
from registry.services.recurrence_board import recurrence_board
from registry.services.series_pages import home
from registry.services.study_report import report_record, study_report
from registry.services.upkeep import recount
from seed_demo.building import build_demo
from seed_demo.scenario import PLANTED, RENAMED, STUDIES
from tests.support.studies import CHEAP, PASSWORD

NOW = datetime(2026, 12, 1, tzinfo=UTC)


def test_the_same_seed_builds_the_same_trials_and_nothing_is_wrong(database: Database, sqlite: Database) -> None:
    first = build_demo(database, now=NOW, password=PASSWORD, hashing=CHEAP)
    second = build_demo(sqlite, now=NOW, password=PASSWORD, hashing=CHEAP)

    lines = [line for series in home(database, first.keeper).series for line in series.studies]
    assert {line.status for line in lines} == {"closed", "running", "planned"}
    assert {line.close_reason for line in lines} == {"size_reached", "early", "extended", None}
    reports = [
        report_record(study_report(where, people.keeper, line.id))
        for line in lines
        for where, people in ((database, first), (sqlite, second))
    ]
    assert reports[0::2] == reports[1::2]
    assert recount(database).faults == ()


def test_the_board_of_the_demo_shows_what_was_planted(sqlite: Database) -> None:
    people = build_demo(sqlite, now=NOW, password=PASSWORD, hashing=CHEAP)

    board = recurrence_board(sqlite, people.keeper, home(sqlite, people.keeper).series[0].id)

    old, new = RENAMED
    verdicts = {
        (
            tuple(each["factors"]),
            tuple(tuple(old if level == new else level for level in pair) for pair in each["levels"]),
        ): (each["verdict"])
        for each in board.record["interactions"]
    }
    assert {planted: verdicts[planted.factors, planted.levels] for planted in PLANTED} == {
        planted: planted.verdict for planted in PLANTED
    }


@pytest.mark.parametrize("place", [0, 1, 2, 5])
def test_true_means_lie_where_the_report_says(sqlite: Database, place: int) -> None:
    # The truth is asked of the generator; six standard errors leave it a chance below one in a hundred million.
    people = build_demo(sqlite, now=NOW, password=PASSWORD, hashing=CHEAP)
    planned = STUDIES[place]
    series = home(sqlite, people.keeper).series[0]
    line = next(line for line in series.studies if line.title == planned.title)

    record = report_record(study_report(sqlite, people.keeper, line.id))

    in_minutes = 60 if record["study"]["unit"] == "s" else 1
    contrasts = [each for each in record["interaction_contrasts"] if set(each["factors"]) == {"walk", "start"}]
    assert contrasts
    for each in contrasts:
        (one, other), (levels, beside) = each["factors"], each["levels"]
        truth = in_minutes * planned.true_difference_of_differences((one, *levels), (other, *beside))
        assert abs(each["estimate"] - truth) < 6 * each["se"], each
