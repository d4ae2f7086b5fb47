"""Days and times in the zone of the study."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone

from web.times import day, machine_time, moment, time_zones


def test_a_day_is_the_day_at_the_site() -> None:
    late = datetime(2026, 3, 2, 23, 30, tzinfo=UTC)

    assert day(late, "Europe/Copenhagen") == "3 March 2026"
    assert day(late) == "2 March 2026"


def test_a_time_names_its_zone_in_winter_and_in_summer() -> None:
    assert moment(datetime(2026, 1, 5, 9, 5, tzinfo=UTC), "Europe/Copenhagen") == "5 January 2026, 10:05 CET"
    assert moment(datetime(2026, 7, 5, 9, 5, tzinfo=UTC), "Europe/Copenhagen") == "5 July 2026, 11:05 CEST"


def test_machines_read_a_time_in_utc() -> None:
    assert machine_time(datetime(2026, 1, 5, 9, 5, tzinfo=timezone(timedelta(hours=1)))) == "2026-01-05T08:05:00Z"


def test_every_zone_is_offered_once_under_its_region() -> None:
    zones = [zone for _, group in time_zones() for zone in group]

    assert len(zones) == len(set(zones)) > 400
    assert "Europe/Copenhagen" in dict(time_zones())["Europe"]
    assert time_zones()[-1][0] == "Other"
