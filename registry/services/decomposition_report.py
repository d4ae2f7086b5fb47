"""A decomposition as plain text that reads from the answer to the table."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from textwrap import wrap

from registry.analysis.own_spread import games_howell
from registry.analysis.results import Comparison, Decomposition, Estimate, FamilyInterval, Offset
from registry.analysis.undefined import ALIASED, Number, Undefined
from registry.trials.terms import term_name

WIDTH = 96


def as_report(result: Decomposition, *, response: str, step: str, notes: Sequence[str] = ()) -> str:
    """Write a decomposition for people: a sentence first, then how each mean is built, then the divisions."""
    return _Report(result, response, step).text(notes)


@dataclass(frozen=True)
class _Report:
    """One report under way; means and differences are written to two digits more than the step."""

    result: Decomposition
    response: str
    step: str

    @property
    def own(self) -> bool:
        """Whether every combination is judged by its own spread."""
        return self.result.error == "per-cell" and self.result.layout.block is None

    def text(self, notes: Sequence[str]) -> str:
        parts = [
            *self._opening(),
            "",
            *self._build_up(),
            "",
            *self._sources(),
            "",
            *self._differences(),
        ]
        said = [*self.result.notes, *notes]
        if said:
            told = (line for note in said for line in wrap(f"- {note}", WIDTH, subsequent_indent="  "))
            parts += ["", "Notes", *told]
        return "\n".join(parts).rstrip() + "\n"

    def _opening(self) -> Iterator[str]:
        result = self.result
        crossed = term_name([factor.name for factor in result.layout.factors])
        opening = f"{self.response} by {crossed}: {result.trials} trials, {result.balance}, in steps of {self.step}."
        yield from wrap(opening, WIDTH)
        mean = result.equal_weight
        if isinstance(mean.estimate, Undefined):
            yield from wrap(f"The grand mean with equal weights cannot be given: {mean.estimate.reason}.", WIDTH)
            mean = result.as_logged
            yield from wrap(f"The mean as logged is {self._mean(mean.estimate)}{self._between(mean)}.", WIDTH)
        else:
            yield from wrap(f"The grand mean is {self._mean(mean.estimate)}{self._between(mean)}.", WIDTH)
        strongest = self._strongest()
        if strongest:
            yield from wrap(strongest, WIDTH)

    def _strongest(self) -> str:
        """Name the widest difference between two levels that was found, as a plain sentence."""
        pairs = self.result.comparisons
        known = [pair for pair in pairs if not isinstance(pair.difference, Undefined)]
        if not known:
            return ""
        widest = max(known, key=lambda pair: abs(_number(pair.difference)))
        size = _number(widest.difference)
        if self._mean(abs(size)) == self._mean(0.0):
            return "No two levels of a factor differ."
        which = "The widest difference" if len(known) == len(pairs) else "The widest difference that can be estimated"
        word = "above" if size > 0 else "below"
        sentence = f"{which}: {widest.factor} {widest.to_level} is {self._mean(abs(size))} {word} {widest.from_level}"
        family = self._family(widest)
        if isinstance(family.lower, Undefined) or isinstance(family.upper, Undefined):
            reason = family.lower if isinstance(family.lower, Undefined) else family.upper
            return f"{sentence}; how sure that is cannot be said: {_reason(reason)}."
        low, high = sorted((abs(family.lower), abs(family.upper)))
        if family.lower < 0 < family.upper:
            between = f"{self._mean(family.lower)} to {self._mean(family.upper)}"
            return f"{sentence}, {between}: its direction is not settled."
        return f"{sentence}, {self._mean(low)} to {self._mean(high)}."

    def _family(self, pair: Comparison) -> FamilyInterval:
        """Adjust a difference by the error that was asked for."""
        if not self.own:
            return pair.tukey_kramer
        levels = next(len(factor.levels) for factor in self.result.layout.factors if factor.name == pair.factor)
        return games_howell(pair, levels=levels, confidence=self.result.confidence)

    def _build_up(self) -> Iterator[str]:
        """Show how every combination's mean is built, offset by offset."""
        blocked = self.result.layout.block is not None
        yield "How each mean is built: grand mean, then the offset of each term" + (
            ", blocks allowed for" if blocked else ""
        )
        treatments = [term for term in self.result.terms if term.role == "treatment"]
        terms = [term for term in treatments if term.offsets]
        factors = len(self.result.layout.factors)
        # Without a lower term a mean would say something else; the highest one may be taken to be nil.
        whole = all(term.offsets or len(term.factors) == factors > 1 for term in treatments)
        heads = ["combination", "trials", "mean", "grand", *(term_name(term.factors) for term in terms)]
        rows = []
        for cell in self.result.cells:
            offsets = [_offset_of(term.offsets, cell.levels) for term in terms]
            built = _built_mean(self.result.equal_weight.estimate, offsets) if whole else ALIASED
            mean = built if blocked else cell.mean
            rows.append(
                [
                    ", ".join(cell.levels.values()),
                    str(cell.n),
                    self._mean(mean),
                    self._mean(self.result.equal_weight.estimate),
                    *(self._signed(offset) for offset in offsets),
                ]
            )
        yield from _table(heads, rows)

    def _sources(self) -> Iterator[str]:
        judged = "; F by each combination's own spread" if self.own else ""
        yield f"Where the variation lies: each term by its equal-weight contrasts{judged}"
        heads = ["source", "freedom", "sum of squares", "mean square", "ratio F", "chance"]
        rows = []
        for term in self.result.terms:
            line = term.sequential if term.role == "block" else term.equal_weight
            name = f"{term_name(term.factors)} (block)" if term.role == "block" else term_name(term.factors)
            f, p = (term.per_cell.f, term.per_cell.p) if self.own else (line.f, line.p)
            freedom = str(line.df or term.df or "-")
            rows.append([name, freedom, _figure(line.ss), _figure(line.ms), _figure(f), _chance(p)])
        rest, total = self.result.residual, self.result.total
        rows.append(["left over", str(rest.df), _figure(rest.ss), _figure(rest.ms), "", ""])
        rows.append(["all", str(total.df), _figure(total.ss), "", "", ""])
        yield from _table(heads, rows)

    def _differences(self) -> Iterator[str]:
        share = f"{self.result.confidence * 100:g} %"
        spread = ", each combination with its own spread" if self.own else ""
        yield f"Differences between levels: {share} intervals that hold for all pairs of a factor at once{spread}"
        heads = ["factor", "from", "to", "difference", "lower", "upper", "chance"]
        rows = []
        for pair in self.result.comparisons:
            family = self._family(pair)
            numbers = (pair.difference, family.lower, family.upper)
            levels = [pair.factor, pair.from_level, pair.to_level]
            rows.append([*levels, *map(self._signed, numbers), _chance(family.p)])
        yield from _table(heads, rows)

    def _mean(self, value: Number) -> str:
        if isinstance(value, Undefined):
            return "-"
        places = min(len(self.step.partition(".")[2]) + 2, 12)
        return f"{value:.{places}f}" if abs(value) < 1e15 else f"{value:.6g}"

    def _signed(self, value: Number) -> str:
        text = self._mean(value)
        if text == "-" or text.startswith("-"):
            return text if any(digit in text for digit in "123456789") or text == "-" else text[1:]
        return f"+{text}" if any(digit in text for digit in "123456789") else text

    def _between(self, value: Estimate) -> str:
        if isinstance(value.lower, Undefined):
            return ""
        return f" ({self._mean(value.lower)} to {self._mean(value.upper)})"


def _number(value: Number) -> float:
    return 0.0 if isinstance(value, Undefined) else value


def _reason(value: Number) -> str:
    return value.reason if isinstance(value, Undefined) else ""


def _built_mean(grand: Number, offsets: Sequence[Number]) -> Number:
    """Add a mean up from its parts; one part that is undefined leaves it so."""
    for part in (grand, *offsets):
        if isinstance(part, Undefined):
            return part
    return _number(grand) + sum(_number(offset) for offset in offsets)


def _offset_of(offsets: Sequence[Offset], levels: Mapping[str, str]) -> Number:
    for offset in offsets:
        if all(levels[name] == level for name, level in offset.levels.items()):
            return offset.value.estimate
    return Undefined("this combination has none")


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


def _figure(value: Number) -> str:
    return "-" if isinstance(value, Undefined) else f"{value:.6g}"


def _chance(value: Number) -> str:
    if isinstance(value, Undefined):
        return "-"
    return "< 0.0001" if value < 0.0001 else f"{value:.4f}"
