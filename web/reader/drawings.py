"""What a reader's page draws from its record; kept with a fixed link, so that it never changes."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from flask import render_template

from registry.services.figures import Figure, Interval
from web.strips import Reading, Shape, StripChart, strip_chart


def draw(scope: str, record: Mapping[str, Any]) -> Mapping[str, str]:
    """Draw the figures of a record, each as one piece of markup in which all text is escaped."""
    charts = _of_comparison(record) if scope == "comparison" else _of_study(record)
    return {chart.name: render_template("reader/_drawing.html", chart=chart) for chart in charts if chart is not None}


def _of_study(record: Mapping[str, Any]) -> Iterator[StripChart | None]:
    margin = float(record["study"]["margin"]) if record["study"]["margin"] else None
    key: tuple[tuple[Shape, str], ...] = (("dot", "estimate with its interval"),)
    for name, lines, caption in (
        ("differences", record.get("differences", ()), "Differences between the levels of a factor."),
        ("changes", record.get("changes", ()), "How a difference depends on another factor."),
    ):
        yield strip_chart(
            [(line["name"], (Reading(_interval(line), "dot"),)) for line in lines],
            name=f"{name}-figure", caption=caption, described_by=f"{name}-caption", unit=record["study"]["unit_name"],
            margin=margin, key=key,
        )  # fmt: skip


def _interval(line: Mapping[str, Any]) -> Interval:
    value, lower, upper = (Figure(**line[part]) for part in ("estimate", "lower", "upper"))
    return Interval(value, Figure(None), lower, upper)


def _of_comparison(record: Mapping[str, Any]) -> Iterator[StripChart | None]:
    first, second = (study["title"] for study in record["studies"])
    shapes: tuple[tuple[str, Shape], ...] = (("first", "ring"), ("second", "dot"), ("change", "diamond"))
    lines = [
        (line["name"], tuple(Reading(_plain_interval(line[part]), shape) for part, shape in shapes))
        for line in (*record["differences"], *record["interactions"])
    ]
    yield strip_chart(
        lines,
        name="changes-figure",
        caption="Each contrast in the earlier study, in the later one, and the later less the earlier.",
        described_by="changes-caption",
        unit=record["unit_name"],
        margin=float(record["margin"]) if record["margin"] else None,
        key=(("ring", first), ("dot", second), ("diamond", "the change")),
    )


def _plain_interval(numbers: Mapping[str, float | None]) -> Interval:
    value, lower, upper = (Figure(numbers[part]) for part in ("estimate", "lower", "upper"))
    return Interval(value, Figure(None), lower, upper)
