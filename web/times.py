"""Days and times as people read them, in the zone of the study."""

from __future__ import annotations

from datetime import UTC, datetime
from functools import cache
from zoneinfo import ZoneInfo, available_timezones

from flask import Flask

# Written out, so that a page does not change with the locale of the server.
MONTHS = (
    "January", "February", "March", "April", "May", "June",
    "July", "August", "September", "October", "November", "December",
)  # fmt: skip


def install(app: Flask) -> None:
    """Give templates the filters ``day``, ``moment`` and ``machine_time``."""
    app.add_template_filter(day)
    app.add_template_filter(moment)
    app.add_template_filter(machine_time)


def day(at: datetime, zone: str = "UTC") -> str:
    """Write the day, as in 2 March 2026."""
    local = at.astimezone(ZoneInfo(zone))
    return f"{local.day} {MONTHS[local.month - 1]} {local.year}"


def moment(at: datetime, zone: str = "UTC") -> str:
    """Write the day and the time with the zone's own abbreviation, as in 2 March 2026, 10:05 CET."""
    local = at.astimezone(ZoneInfo(zone))
    return f"{day(at, zone)}, {local:%H:%M} {local.tzname()}"


def machine_time(at: datetime) -> str:
    """Write a time for the attribute that machines read."""
    return f"{at.astimezone(UTC):%Y-%m-%dT%H:%M:%SZ}"


@cache
def time_zones() -> tuple[tuple[str, tuple[str, ...]], ...]:
    """List the time zones to choose from, by region."""
    regions: dict[str, list[str]] = {}
    for zone in sorted(available_timezones()):
        region = zone.partition("/")[0] if "/" in zone else "Other"
        regions.setdefault(region, []).append(zone)
    ordered = sorted(regions, key=lambda region: (region == "Other", region))
    return tuple((region, tuple(regions[region])) for region in ordered)
