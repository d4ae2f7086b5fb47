"""Checking one trial against its study's frame, before anything is written."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime, timedelta

from registry.errors import Fault, InputRefused, OffGrid, ReadingRefused
from registry.storage.frame import FrameFactor, FrameResponse, StudyFrame
from registry.trials.readings import nearest_steps, read_steps, write_steps
from registry.trials.tallies import MAX_DISTANCE

# A phone's clock may run ahead a little; more than this is a slip of the day or the zone.
CLOCK_SLACK = timedelta(hours=1)

# A reading itself stays well inside 64 bits, so that no sum on the way can leave them.
EARLIEST_YEAR = 1970
FARTHEST_READING = 2**62

_YES_NO = {"yes": 1, "y": 1, "true": 1, "1": 1, "no": 0, "n": 0, "false": 0, "0": 0}


def find_cell(frame: StudyFrame, levels: Mapping[str, str], *, where: str) -> tuple[int | None, list[Fault]]:
    """Find the cell that a mapping of factor to level names; faults name every factor that is amiss."""
    known = {factor.name: factor for factor in frame.factors}
    faults = [
        Fault(placed(where, name), f"this study has no factor {name!r}", _factor_names(frame), f"levels-{name}")
        for name in levels
        if name not in known
    ]
    ranks: list[int] = []
    for factor in frame.factors:
        if factor.role == "held" and factor.name not in levels:
            continue
        try:
            rank = checked_level(
                factor,
                levels.get(factor.name, ""),
                place=placed(where, factor.name),
                field=f"levels-{factor.name}",
            )
        except InputRefused as error:
            faults += error.faults
        else:
            ranks += [] if factor.role == "held" else [rank]
    return (None if faults else frame.cells[tuple(ranks)]), faults


def placed(where: str, what: str) -> str:
    """Say a place: what, and in which trial or line when there are several."""
    return f"{where}, {what}" if where else what


def _factor_names(frame: StudyFrame) -> str:
    return "its factors are " + ", ".join(factor.name for factor in frame.factors)


def checked_level(factor: FrameFactor, text: str, *, place: str, field: str) -> int:
    """Read one text as the rank of a factor's level, by name or alias, or refuse it with the levels there are."""
    level = text.strip()
    rank = factor.known_as.get(level)
    if rank is not None:
        return rank
    if factor.role == "held":
        accepted = f"this study holds {factor.name} at {factor.levels[0]}"
    else:
        accepted = "choose one of " + ", ".join(factor.levels)
    raise InputRefused(Fault(place, f"{level!r} given" if level else "no level given", accepted, field))


def checked_reading(response: FrameResponse, text: str, *, place: str, field: str, rounding: bool = False) -> int:
    """Read one text as steps of a response, or refuse it saying where and what would do.

    With ``rounding`` a value between two steps is taken to the nearest one: only where
    somebody agreed to it knowingly.
    """
    if response.kind == "yes_no":
        return _yes_or_no(text, place=place, field=field)
    try:
        steps = nearest_steps(text, response.step) if rounding else read_steps(text, response.step)
    except OffGrid as error:
        fault = error.faults[0]
        raise OffGrid(Fault(place, fault.given, fault.accepted, field), offered=error.offered) from None
    except ReadingRefused as error:
        fault = error.faults[0]
        raise ReadingRefused(Fault(place, fault.given, fault.accepted, field)) from None
    if abs(steps) > FARTHEST_READING:
        raise ReadingRefused(
            Fault(place, f"{text.strip()} is more than 2⁶² steps from zero", "check the unit and the step", field)
        )
    return steps


def _yes_or_no(text: str, *, place: str, field: str) -> int:
    steps = _YES_NO.get(text.strip().lower())
    if steps is None:
        raise ReadingRefused(Fault(place, f"{text.strip()!r} given", "give yes or no", field))
    return steps


def shown_reading(response: FrameResponse, steps: int) -> str:
    """Write a reading as people read it."""
    if response.kind == "yes_no":
        return "yes" if steps else "no"
    return write_steps(steps, response.step)


def far_reading(response: FrameResponse, steps: int, *, anchor: int, place: str, field: str) -> ReadingRefused:
    """Make the refusal of a reading too far from the first one for the tallies to hold: surely a slip of the unit."""
    given = write_steps(steps, response.step)
    first = write_steps(anchor, response.step)
    return ReadingRefused(
        Fault(
            place,
            f"{given} is more than {MAX_DISTANCE} steps of {response.step} from the first reading, {first}",
            "check the unit",
            field,
        )
    )


def time_faults(happened_at: datetime | None, *, now: datetime, where: str) -> list[Fault]:
    """Refuse a time without zone, one before there were such records, or one that has not come yet."""
    place = placed(where, "time")
    if happened_at is not None and happened_at.year < EARLIEST_YEAR:
        given = f"the year {happened_at.year} given"
        return [Fault(place, given, f"give a time from {EARLIEST_YEAR} on", "happened_at")]
    if happened_at is not None and happened_at.tzinfo is None:
        return [
            Fault(place, f"{happened_at} has no time zone", "give one, as in 2026-03-02T14:05+01:00", "happened_at")
        ]
    if happened_at is not None and happened_at > now + CLOCK_SLACK:
        return [
            Fault(place, f"{happened_at:%Y-%m-%d %H:%M} has not come yet", "check the day and the clock", "happened_at")
        ]
    return []
