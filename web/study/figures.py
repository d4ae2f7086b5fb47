"""Figures of a study's page, as plain descriptions that the figure script draws."""

from __future__ import annotations

from typing import Any

from registry.services.build_up import BuildUp, BuiltMean
from registry.services.figures import Interval
from registry.services.study_report import StudyReport
from web.figures import Figure, plain

ABOVE, BELOW, INK, SOFT, GROUND = "var(--madder)", "var(--woad)", "var(--ink)", "var(--ink-soft)", "var(--linen)"
TABLE = "build-up-caption"
PATTERNS = ("", "/", "x")
SYMBOLS = ("circle", "square", "diamond", "cross", "triangle-up", "star", "hexagon", "x")
DASHES = ("solid", "dash", "dot", "dashdot", "longdash", "longdashdot")


def build_figure(report: StudyReport) -> Figure | None:
    """Build each cell from the grand-mean line, offset by offset, with the interval of the last step."""
    if report.findings is None:
        return None
    table = report.findings.table
    grand = table.grand.value.value
    cells = [cell for row in table.cells for cell in row] or list(table.row_means)
    known = [cell for cell in cells if _all_known(cell)]
    if grand is None or not known:
        return None
    steps = len(known[0].parts)
    traces = [_step_trace(known, at, grand, last=at == steps - 1, places=report.places) for at in range(steps)]
    traces.append(_mean_trace(known, report.places))
    layout = _layout(report) | {
        "barmode": "group",
        "bargap": 0.25,
        "bargroupgap": 0.08,
        "shapes": [_grand_line(grand)],
        "xaxis": {"type": "multicategory" if table.column_factor else "category", "tickangle": "auto"},
    }
    caption = (
        "How each mean is built, to scale: from the grand mean (dotted), step by step by the offsets in the order of"
        " the key, to the mean (diamond). Bars above stand for more, bars below for less; the last one bears its"
        " interval."
    )
    return Figure("build-up-figure", caption, TABLE, traces, layout, height=420)


def _grand_line(grand: float) -> dict[str, Any]:
    line = {"color": INK, "width": 1.5, "dash": "dot"}
    return {"type": "line", "xref": "paper", "x0": 0, "x1": 1, "y0": grand, "y1": grand, "line": line}


def _all_known(cell: BuiltMean) -> bool:
    return cell.mean.value.value is not None and all(part.offset.value.value is not None for part in cell.parts)


def _step_trace(cells: list[BuiltMean], at: int, grand: float, *, last: bool, places: int) -> dict[str, Any]:
    bases = [grand + sum(_value(part.offset) for part in cell.parts[:at]) for cell in cells]
    offsets = [_value(cell.parts[at].offset) for cell in cells]
    trace: dict[str, Any] = {
        "type": "bar",
        "name": plain(f"offset of {cells[0].parts[at].term}"),
        "x": _places(cells),
        "y": offsets,
        "base": bases,
        "offsetgroup": str(at),
        "marker": {
            "color": [ABOVE if offset > 0 else BELOW for offset in offsets],
            "line": {"color": INK, "width": 0.5},
            "pattern": {"shape": PATTERNS[at], "fillmode": "overlay", "fgcolor": GROUND, "size": 6, "solidity": 0.35},
        },
        "hovertemplate": f"%{{y:+.{places}f}}<extra>%{{fullData.name}}</extra>",
    }
    spans = [(cell.parts[at].offset.lower.value, cell.parts[at].offset.upper.value) for cell in cells]
    if last and all(low is not None and high is not None for low, high in spans):
        trace["error_y"] = {
            "type": "data",
            "symmetric": False,
            "array": [(high or 0) - offset for (_, high), offset in zip(spans, offsets, strict=True)],
            "arrayminus": [offset - (low or 0) for (low, _), offset in zip(spans, offsets, strict=True)],
            "color": INK,
            "thickness": 1.2,
            "width": 3,
        }
    return trace


def _mean_trace(cells: list[BuiltMean], places: int) -> dict[str, Any]:
    return {
        "type": "scatter",
        "mode": "markers",
        "name": "mean",
        "x": _places(cells),
        "y": [_value(cell.mean) for cell in cells],
        "marker": {"color": GROUND, "symbol": "diamond", "size": 8, "line": {"color": INK, "width": 1.5}},
        "hovertemplate": f"%{{y:.{places}f}}<extra>mean</extra>",
    }


def _places(cells: list[BuiltMean]) -> list[Any]:
    """Name each cell on the axis: one list of names, or two for a crossed table."""
    columns = list(zip(*(tuple(map(plain, cell.levels.values())) for cell in cells), strict=True))
    return [list(column) for column in columns] if len(columns) > 1 else list(columns[0])


def _value(interval: Interval) -> float:
    return interval.value.value if interval.value.value is not None else 0.0


def lines_figure(report: StudyReport) -> Figure | None:
    """Draw cell means as lines: one a column of the table, along its rows, each with its interval."""
    if report.findings is None or report.findings.table.column_factor is None:
        return None
    table = report.findings.table
    traces = [
        _line_trace(table, at, column, report.places)
        for at, column in enumerate(table.columns)
        if any(row[at].mean.value.value is not None for row in table.cells)
    ]
    if not traces:
        return None
    layout = _layout(report) | {"xaxis": {"type": "category", "title": {"text": plain(table.row_factor)}}}
    caption = (
        f"Means with their intervals along {table.row_factor}, one line for each level of {table.column_factor}."
        " Lines that run side by side mean that the two do not depend on each other."
    )
    return Figure("lines-figure", caption, TABLE, traces, layout)


def _line_trace(table: BuildUp, at: int, column: str, places: int) -> dict[str, Any]:
    cells = [row[at] for row in table.cells]
    means = [cell.mean.value.value for cell in cells]
    spans = [(cell.mean.lower.value, cell.mean.upper.value) for cell in cells]
    colour = (INK, ABOVE, BELOW, SOFT)[at % 4]
    trace: dict[str, Any] = {
        "type": "scatter",
        "mode": "lines+markers",
        "name": plain(f"{table.column_factor} {column}"),
        "x": [plain(row) for row in table.rows],
        "y": means,
        "line": {"color": colour, "width": 2, "dash": DASHES[at % len(DASHES)]},
        "marker": {"color": colour, "symbol": SYMBOLS[at % len(SYMBOLS)], "size": 9},
        "hovertemplate": f"%{{y:.{places}f}}<extra>%{{fullData.name}}</extra>",
    }
    if all(
        mean is None or (low is not None and high is not None) for mean, (low, high) in zip(means, spans, strict=True)
    ):
        trace["error_y"] = {
            "type": "data",
            "symmetric": False,
            "array": [
                high - mean if mean is not None and high is not None else None
                for mean, (_, high) in zip(means, spans, strict=True)
            ],
            "arrayminus": [
                mean - low if mean is not None and low is not None else None
                for mean, (low, _) in zip(means, spans, strict=True)
            ],
            "color": colour,
            "thickness": 1.2,
            "width": 4,
        }
    return trace


def _layout(report: StudyReport) -> dict[str, Any]:
    title = plain(f"{report.response.name} ({report.response.unit_name})")
    return {"yaxis": {"title": {"text": title}, "zeroline": False}}
