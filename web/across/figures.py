"""Figures across studies: both studies and the change, and every study of an interaction, on one scale."""

from __future__ import annotations

from collections.abc import Iterator

from registry.services.comparison import Comparison
from registry.services.recurrence_board import RecurrenceBoard, RecurrenceLine
from web.strips import Reading, Shape, StripChart, strip_chart

TABLE = "changes-caption"
BOARD_TABLE = "board-caption"


def change_figure(comparison: Comparison) -> StripChart | None:
    """Draw every contrast in both studies and the change between them."""
    lines = [
        (line.name, (Reading(line.first, "ring"), Reading(line.second, "dot"), Reading(line.change, "diamond")))
        for line in (*comparison.differences, *comparison.interactions)
    ]
    key: tuple[tuple[Shape, str], ...] = (
        ("ring", comparison.first.title),
        ("dot", comparison.second.title),
        ("diamond", "the change"),
    )
    caption = (
        "Each contrast in the earlier study, in the later one, and the later less the earlier. The intervals of the"
        " studies hold 95 % each; that of a change is adjusted for all changes of its term."
    )
    margin = float(comparison.margin) if comparison.margin else None
    return strip_chart(
        lines, name="changes-figure", caption=caption, described_by=TABLE, unit=comparison.unit_name, margin=margin,
        key=key,
    )  # fmt: skip


def board_figure(board: RecurrenceBoard) -> StripChart | None:
    """Draw one line an interaction and one mark a study, the pooled mark last."""
    key: tuple[tuple[Shape, str], ...] = (("dot", "one study, by its number"), ("diamond", "all together"))
    caption = (
        "Each interaction over the studies that can speak to it, in order of time, and all together. A faint mark is a"
        " study that may not judge: closed early, extended, or without a plan."
    )
    margin = float(board.margin) if board.margin else None
    return strip_chart(
        [(f"{line.name}: {line.words}", tuple(_readings(line))) for line in board.lines],
        name="board-figure", caption=caption, described_by=BOARD_TABLE, unit=board.unit_name, margin=margin, key=key,
    )  # fmt: skip


def _readings(line: RecurrenceLine) -> Iterator[Reading]:
    for mark in line.marks:
        yield Reading(mark.value, "dot", label=str(mark.place), faint=not mark.judged)
    if line.pooled is not None:
        yield Reading(line.pooled, "diamond", label="all")
