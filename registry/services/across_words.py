"""Words for what is said across studies: verdicts, changes, and what cannot be set side by side."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from registry.analysis.undefined import Undefined
from registry.services.lasting_names import Names
from registry.synthesis.changes import Apart
from registry.synthesis.common_ground import Caveat
from registry.synthesis.recurrence import Board, Omitted, Recurrence, VerdictCode

VERDICTS: dict[VerdictCode, str] = {
    "seen_again": "seen again",
    "once": "once so far",
    "opposite": "opposite in some studies",
    "small": "too small overall",
    "single": "one study only",
    "unsettled": "not settled",
}
SMALL_IN_EACH = "too small every time"
NEXT: dict[VerdictCode, str] = {
    "seen_again": "plan the next study by slice: the better level differs from one to the other",
    "once": "repeat this corner, with trials enough to see it alone",
    "opposite": "look for what differs between those studies before running another",
    "small": "leave the two factors to add up, and spend the trials elsewhere",
    "single": "run the same four combinations in another study",
    "unsettled": "plan for precision",
}


def verdict_words(recurrence: Recurrence) -> str:
    """Give the verdict in its words."""
    if recurrence.verdict == "small" and recurrence.small_in_each:
        return SMALL_IN_EACH
    return VERDICTS[recurrence.verdict]


def verdict_sentence(recurrence: Recurrence) -> str:
    """Say a verdict in one sentence that claims no more than its counts."""
    counts, k = recurrence.counts, len(recurrence.each)
    match recurrence.verdict:
        case "single":
            return "Only one study can speak to this."
        case "small":
            return f"Too small to matter in at least {counts.nil} of {k} studies."
        case "opposite":
            return "At least one study shows it one way and at least one the other."
        case "seen_again":
            agree = " Every estimate has the same sign." if recurrence.agree_in_sign else ""
            return f"At least {max(counts.up, counts.down)} of {k} studies show it, in the same direction.{agree}"
        case "once":
            return "At least one study shows it; not yet two."
        case _:
            return "The studies cannot say yet."


def contrast_name(corners: Mapping[Any, tuple[Any, Any]], names: Names) -> str:
    """Name a contrast by what it subtracts: walk: return − serpentine, or how that changes with another factor."""
    (factor, (first, second)), *beside = corners.items()
    difference = f"{names.level(second)} \N{MINUS SIGN} {names.level(first)}"
    if not beside:
        return f"{names.factor(factor)}: {difference}"
    other, (before, after) = beside[0]
    return (
        f"{names.factor(factor)} \N{MULTIPLICATION SIGN} {names.factor(other)}: ({difference}) at"
        f" {names.level(after)} less at {names.level(before)}"
    )


def apart_words(apart: Apart, names: Names, *, first: str, second: str) -> str:
    """Say why a factor or a level cannot be compared; ``first`` and ``second`` name the two studies."""
    factor = names.factor(apart.factor)
    one, other = (names.several(levels) if levels else "" for levels in (apart.first, apart.second))
    match apart.code:
        case "held_in_one":
            held, crossed, where, elsewhere = (
                (one, other, first, second) if len(apart.first) == 1 else (other, one, second, first)
            )
            shared = set(apart.first) & set(apart.second)
            rest = f"all else is read at {held}" if shared else f"{held} is not among them, so all else averages apart"
            return f"{factor}: held at {held} in {where}, crossed over {crossed} in {elsewhere}; {rest}."
        case "held_apart":
            return f"{factor}: held at {one} in {first} and at {other} in {second}; what changed may come from that."
        case "block_in_one":
            return f"{factor}: a block in one of the two; the effect of a block is never shown."
        case "absent_in_one":
            having, levels = (first, one) if apart.first else (second, other)
            return f"{factor}: only {having} has it; there all else is averaged over {levels}."
        case "one_level_shared":
            shared_one = next(level for level in apart.first if level in apart.second)
            return (
                f"{factor}: the two studies share only {names.level(shared_one)}, and a difference needs two levels;"
                f" all else is read at {names.level(shared_one)}."
            )
        case "no_level_shared":
            told = f"{factor}: no level is shared ({one} in {first}, {other} in {second})"
            return f"{told}; all else averages over different levels.{_successions(apart, names)}"
        case _:
            parts = [f"{levels} only in {study}" for levels, study in ((one, first), (other, second)) if levels]
            return f"{factor}: {'; '.join(parts)}.{_successions(apart, names)}"


def _successions(apart: Apart, names: Names) -> str:
    """Say which level took another's place when its meaning changed."""
    told = [
        f" {names.level(level)} took the place of {names.level(before)} when its meaning changed,"
        " so they are two levels and not compared as one."
        for level in (*apart.second, *apart.first)
        if (before := names.levels[level].replaces) is not None and before in (*apart.first, *apart.second)
    ]
    return "".join(told)


def caveat_words(caveat: Caveat, names: Names, titles: Mapping[Any, str]) -> str:
    """Say what differs, or is narrowed, beside a contrast."""
    factor = names.factor(caveat.factor)
    having = {key: levels for key, levels in caveat.levels.items() if levels}
    match caveat.code:
        case "slice":
            shared = [level for level in next(iter(having.values())) if all(level in each for each in having.values())]
            return (
                f"{factor} is averaged over {names.several(shared)} alone, the levels that all of these studies have."
            )
        case "held_apart":
            held = "; ".join(f"{names.several(levels)} in {titles[key]}" for key, levels in having.items())
            return f"{factor} was held at different levels: {held}."
        case "only_one_has":
            lacking = " and ".join(titles[key] for key, levels in caveat.levels.items() if not levels)
            return f"{factor} is not set down in {lacking}, so what it was there may move the difference."
        case _:
            each = "; ".join(f"{names.several(levels)} in {titles[key]}" for key, levels in having.items())
            return f"{factor} is averaged over different levels: {each}. A difference that depends on it may move."


def renamed_words(levels: Sequence[Any], names: Names) -> list[str]:
    """Say which of some levels have gone by other names."""
    return [
        f"{names.level(level)} has also been called {' and '.join(names.levels[level].aliases)}; it is the same level."
        for level in dict.fromkeys(levels)
        if names.levels[level].aliases
    ]


def omitted_words(omitted: Omitted, names: Names) -> str:
    """Say why a contrast is not on the board."""
    name = contrast_name(omitted.corners, names)
    if omitted.crossed:
        return (
            f"{name}: left out, because the studies that cross it miss combinations, run with blocks, or vary nowhere"
        )
    return f"{name}: left out, because no study has all four corners"


def silent_words(recurrence: Recurrence) -> str:
    """Say which studies cross a contrast and still cannot estimate it; nothing when all can."""
    if not recurrence.silent:
        return ""
    several = " and ".join(recurrence.silent)
    return (
        f"{several} cannot say: combinations it averages over have no trials, it is aliased with blocks, or the"
        " readings show no spread"
    )


def silent_notes(board: Board, names: Names) -> list[str]:
    """Say of every contrast which studies cannot estimate it."""
    return [f"{contrast_name(each.corners, names)}: {silent_words(each)}" for each in board.recurrences if each.silent]


def number(value: float | Undefined) -> float | None:
    """Write a number for a record; what is undefined is null there."""
    return None if isinstance(value, Undefined) else value
