"""A decomposition as plain text that reads from the answer to the table."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from textwrap import wrap

from registry.analysis.results import Decomposition, Estimate, SumOfSquares
from registry.analysis.undefined import Number, Undefined
from registry.trials.terms import term_name

WIDTH = 96


def as_report(result: Decomposition, *, response: str, step: str, notes: Sequence[str] = ()) -> str:
    """Write a decomposition for people: a sentence first, then how each mean is built, then the divisions."""
    parts = [
        *_opening(result, response, step),
        "",
        *_build_up(result),
        "",
        *_sources(result),
        "",
        *_differences(result),
    ]
    said = [*result.notes, *notes]
    if said:
        parts += ["", "Notes", *(line for note in said for line in wrap(f"- {note}", WIDTH, subsequent_indent="  "))]
    return "\n".join(parts).rstrip() + "\n"


def _opening(result: Decomposition, response: str, step: str) -> Iterator[str]:
    crossed = term_name([factor.name for factor in result.layout.factors])
    yield from wrap(f"{response} by {crossed}: {result.trials} trials, {result.balance}, in steps of {step}.", WIDTH)
    mean = result.equal_weight
    if isinstance(mean.estimate, Undefined):
        yield from wrap(f"The grand mean with equal weights cannot be given: {mean.estimate.reason}.", WIDTH)
        mean = result.as_logged
        yield from wrap(f"The mean as logged is {_figure(mean.estimate)}{_between(mean)}.", WIDTH)
    else:
        yield from wrap(f"The grand mean is {_figure(mean.estimate)}{_between(mean)}.", WIDTH)
    strongest = _strongest(result)
    if strongest:
        yield from wrap(strongest, WIDTH)


def _strongest(result: Decomposition) -> str:
    """Name the widest difference between two levels that was found, as a plain sentence."""
    known = [pair for pair in result.comparisons if not isinstance(pair.difference, Undefined)]
    if not known:
        return ""
    widest = max(known, key=lambda pair: abs(pair.difference) if not isinstance(pair.difference, Undefined) else 0.0)
    size = widest.difference if not isinstance(widest.difference, Undefined) else 0.0
    word = "above" if size > 0 else "below"
    sentence = (
        f"The widest difference: {widest.factor} {widest.to_level} is {_figure(abs(size))} {word} {widest.from_level}"
    )
    family = widest.tukey_kramer
    if isinstance(family.lower, Undefined) or isinstance(family.upper, Undefined):
        return sentence + "."
    low, high = sorted((abs(family.lower), abs(family.upper)))
    if family.lower < 0 < family.upper:
        return f"{sentence}, {_figure(family.lower)} to {_figure(family.upper)}: its direction is not settled."
    return f"{sentence}, {_figure(low)} to {_figure(high)}."


def _build_up(result: Decomposition) -> Iterator[str]:
    """Show how every combination's mean is built, offset by offset."""
    yield "How each mean is built: grand mean, then the offset of each term"
    terms = [term for term in result.terms if term.role == "treatment" and term.offsets]
    heads = ["combination", "trials", "mean", "grand", *(term_name(term.factors) for term in terms)]
    rows = []
    for cell in result.cells:
        offsets = [_offset_of(term.offsets, cell.levels) for term in terms]
        rows.append(
            [
                ", ".join(cell.levels.values()),
                str(cell.n),
                _figure(cell.mean),
                _figure(result.equal_weight.estimate),
                *(_signed(offset) for offset in offsets),
            ]
        )
    yield from _table(heads, rows)


def _offset_of(offsets: Sequence[object], levels: Mapping[str, str]) -> Number:
    for offset in offsets:
        wanted: Mapping[str, str] = offset.levels  # type: ignore[attr-defined]
        if all(levels[name] == level for name, level in wanted.items()):
            value: Number = offset.value.estimate  # type: ignore[attr-defined]
            return value
    return Undefined("this combination has none")


def _sources(result: Decomposition) -> Iterator[str]:
    yield "Where the variation lies: each term by its equal-weight contrasts"
    heads = ["source", "freedom", "sum of squares", "mean square", "ratio F", "chance"]
    rows = []
    for term in result.terms:
        line = term.sequential if term.role == "block" else term.equal_weight
        name = f"{term_name(term.factors)} (block)" if term.role == "block" else term_name(term.factors)
        rows.append([name, str(line.df or term.df or "-"), *_line(line)])
    rest = result.residual
    rows.append(["left over", str(rest.df), _figure(rest.ss), _figure(rest.ms), "", ""])
    rows.append(["all", str(result.total.df), _figure(result.total.ss), "", "", ""])
    yield from _table(heads, rows)


def _line(line: SumOfSquares) -> list[str]:
    return [_figure(line.ss), _figure(line.ms), _figure(line.f), _chance(line.p)]


def _differences(result: Decomposition) -> Iterator[str]:
    share = f"{result.confidence * 100:g} %"
    yield f"Differences between levels: {share} intervals that hold for all pairs of a factor at once"
    heads = ["factor", "from", "to", "difference", "lower", "upper", "chance"]
    rows = [
        [
            pair.factor,
            pair.from_level,
            pair.to_level,
            _signed(pair.difference),
            _signed(pair.tukey_kramer.lower),
            _signed(pair.tukey_kramer.upper),
            _chance(pair.tukey_kramer.p),
        ]
        for pair in result.comparisons
    ]
    yield from _table(heads, rows)


def _table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> Iterator[str]:
    widths = [max(len(row[at]) for row in [heads, *rows]) for at in range(len(heads))]
    texts = [at for at in range(len(heads)) if not all(_is_figure(row[at]) for row in rows)]
    for row in [heads, *rows]:
        cells = [value.ljust(width) if at in texts else value.rjust(width)
                 for at, (value, width) in enumerate(zip(row, widths, strict=True))]  # fmt: skip
        yield "  " + "  ".join(cells).rstrip()


def _is_figure(text: str) -> bool:
    return (
        text in ("", "-")
        or text.lstrip("+-<. ").replace(".", "", 1).replace("e", "").replace("+", "").replace("-", "").isdigit()
    )


def _between(value: Estimate) -> str:
    if isinstance(value.lower, Undefined):
        return ""
    return f" ({_figure(value.lower)} to {_figure(value.upper)})"


def _figure(value: Number) -> str:
    return "-" if isinstance(value, Undefined) else f"{value:.6g}"


def _signed(value: Number) -> str:
    return "-" if isinstance(value, Undefined) else f"{value:+.4g}"


def _chance(value: Number) -> str:
    if isinstance(value, Undefined):
        return "-"
    return "< 0.0001" if value < 0.0001 else f"{value:.4f}"
