"""The report on one study: what it says, how each mean is built, where the variation lies."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

from registry.analysis.decomposition import decompose
from registry.analysis.findings import Finding, judge_difference, judge_interaction
from registry.analysis.results import Decomposition, ErrorPolicy, SumOfSquares, TermResult
from registry.analysis.undefined import Number, Undefined
from registry.errors import Fault, NotFound
from registry.services.amounts import places_of
from registry.services.best_combination import BestCombination, best_combination
from registry.services.build_up import BuildUp, build_up
from registry.services.decomposition_record import as_record
from registry.services.figures import Figure, Interval, figure, interval
from registry.services.people import Person
from registry.services.sentences import headline_of, may_judge, sentences_of, why_not_judged
from registry.services.study_card import ResponseLine, StudyCard, open_study_card
from registry.services.tallied import policy_of, tallied_study
from registry.storage.engine import Database
from registry.storage.frame import FrameResponse, StudyFrame, fetch_frame
from registry.storage.tallies import fetch_tallies
from registry.trials.terms import term_name


@dataclass(frozen=True)
class DivisionLine:
    """One division's line of a term."""

    ss: Figure
    ms: Figure
    f: Figure
    p: Figure


@dataclass(frozen=True)
class SourceLine:
    """A term among the sources of variation, by each division; ``f`` and ``p`` follow the study's spread policy."""

    name: str
    role: str
    df: int
    full_df: int
    equal_weight: DivisionLine
    sequential: DivisionLine
    hierarchical: DivisionLine
    f: Figure
    p: Figure


@dataclass(frozen=True)
class ContrastLine:
    """A difference between two levels, or how much one changes, with its adjusted interval and finding."""

    name: str
    estimate: Figure
    lower: Figure
    upper: Figure
    code: str | None
    words: str


@dataclass(frozen=True)
class CellLine:
    """One combination as logged."""

    levels: tuple[str, ...]
    n: int
    mean: Figure
    sd: Figure


@dataclass(frozen=True)
class Findings:
    """Everything a page shows of one response once there is a reading."""

    table: BuildUp
    sources: tuple[SourceLine, ...]
    residual: DivisionLine
    residual_df: int
    residual_sd: Figure
    total_df: int
    total: Figure
    share: Figure
    balance: str
    error: str
    differences: tuple[ContrastLine, ...]
    changes: tuple[ContrastLine, ...]
    cells: tuple[CellLine, ...]
    as_logged: Interval
    notes: tuple[str, ...]
    best: BestCombination
    record: dict[str, Any]


@dataclass(frozen=True)
class StudyReport:
    """One study, one response: sentences first, then what is behind them; ``findings`` is absent before a reading."""

    card: StudyCard
    response: ResponseLine
    places: int
    sentences: tuple[str, ...]
    headline: str
    judged: bool
    why_not_judged: str
    findings: Findings | None


def study_report(
    database: Database,
    person: Person,
    study_id: int,
    *,
    response: str | None = None,
    row: str | None = None,
    column: str | None = None,
) -> StudyReport:
    """Report on one response of a study; the first one when none is named.

    Tallies and the study's revision are read in one transaction, so they belong together.
    """
    with database.read() as session:
        card = open_study_card(session, person, study_id)
        return report_of(session, card, response=response, row=row, column=column)


def report_of(
    session: Any, card: StudyCard, *, response: str | None, row: str | None = None, column: str | None = None
) -> StudyReport:
    """Report inside an open read on a study that the caller may show."""
    frame = fetch_frame(session, card.id)
    chosen = _chosen(frame, response)
    tallied = tallied_study(frame, chosen, fetch_tallies(session, card.id, chosen.response_id))
    line = next(line for line in card.responses if line.name == chosen.name)
    judged = may_judge(card)
    if not any(tally.n for tally in tallied.tallies.values()):
        said = (f"No reading of {chosen.name} counts yet.",)
        return StudyReport(card, line, places_of(line), said, said[0], judged, why_not_judged(card), None)
    result = decompose(tallied, error=policy_of(card.spread, blocked=card.block is not None))
    best = best_combination(line, result)
    return StudyReport(
        card=card,
        response=line,
        places=places_of(line),
        sentences=tuple(sentences_of(card, line, result, best=best)),
        headline=headline_of(card, line, result, best=best),
        judged=judged,
        why_not_judged=why_not_judged(card),
        findings=_findings(card, line, result, best, row=row, column=column, judged=judged),
    )


def _chosen(frame: StudyFrame, name: str | None) -> FrameResponse:
    if name is None:
        return frame.responses[0]
    found = frame.response(name)
    if found is None:
        names = ", ".join(response.name for response in frame.responses)
        raise NotFound(Fault("response", f"this study has no response {name!r}", f"its responses are {names}"))
    return found


def _findings(
    card: StudyCard,
    line: ResponseLine,
    result: Decomposition,
    best: BestCombination,
    *,
    row: str | None,
    column: str | None,
    judged: bool,
) -> Findings:
    margin = float(line.margin) if line.margin else None
    differences = tuple(
        _contrast(
            f"{pair.factor}: {pair.to_level} \N{MINUS SIGN} {pair.from_level}",
            judge_difference(result, pair, margin=margin),
            judged,
        )
        for pair in result.comparisons
    )
    changes = tuple(
        _contrast(
            f"{term_name(each.factors)}: ({each.levels[0][1]} \N{MINUS SIGN} {each.levels[0][0]}) at"
            f" {each.levels[1][1]} less at {each.levels[1][0]}",
            judge_interaction(result, each, margin=margin),
            judged,
        )
        for each in result.interactions
    )
    return Findings(
        table=build_up(result, row=row, column=column),
        sources=tuple(
            SourceLine(
                term_name(term.factors),
                term.role,
                term.df,
                term.full_df,
                _line(term.equal_weight),
                _line(term.sequential),
                _line(term.hierarchical),
                *_judged(term, result.error),
            )
            for term in result.terms
        ),
        residual=DivisionLine(figure(result.residual.ss), figure(result.residual.ms), Figure(None), Figure(None)),
        residual_df=result.residual.df,
        residual_sd=figure(result.residual.sd),
        total_df=result.total.df,
        total=Figure(result.total.ss),
        share=_percent(result.r_squared),
        balance=result.balance,
        error=result.error,
        differences=differences,
        changes=changes,
        cells=tuple(
            CellLine(tuple(cell.levels.values()), cell.n, figure(cell.mean), figure(cell.sd)) for cell in result.cells
        ),
        as_logged=interval(result.as_logged),
        notes=result.notes,
        best=best,
        record=as_record(result, response=line.name, step=line.step),
    )


def _judged(term: TermResult, error: ErrorPolicy) -> tuple[Figure, Figure]:
    """Give the F and p that the study's one spread policy asks for; a block's is that of the first division."""
    if term.role == "block":
        return figure(term.sequential.f), figure(term.sequential.p)
    if error == "per-cell":
        return figure(term.per_cell.f), figure(term.per_cell.p)
    return figure(term.equal_weight.f), figure(term.equal_weight.p)


def _contrast(name: str, finding: Finding, judged: bool) -> ContrastLine:
    known = judged and not isinstance(finding.code, Undefined)
    return ContrastLine(
        name=name,
        estimate=figure(finding.estimate),
        lower=figure(finding.lower),
        upper=figure(finding.upper),
        code=finding.code if known and not isinstance(finding.code, Undefined) else None,
        words=finding.words if known else "",
    )


def _percent(share: Number) -> Figure:
    return Figure(None, share.reason) if isinstance(share, Undefined) else Figure(100 * share)


def _line(line: SumOfSquares) -> DivisionLine:
    return DivisionLine(figure(line.ss), figure(line.ms), figure(line.f), figure(line.p))


def report_record(report: StudyReport) -> dict[str, Any]:
    """Write a report as its JSON twin: the decomposition's record, with the study it belongs to."""
    card = report.card
    record: dict[str, Any] = dict(report.findings.record) if report.findings else {"response": report.response.name}
    record["study"] = {
        "id": card.id,
        "title": card.title,
        "series": card.series_name,
        "site": card.site,
        "status": card.status,
        "close_reason": card.close_reason,
        "spread": card.spread,
        "revision": card.revision,
        "logged": card.logged,
        "set_aside": card.set_aside,
        "planned": card.plan.planned if card.plan else None,
        "factors": [asdict(factor) for factor in card.factors],
        "block": asdict(card.block) if card.block else None,
        "held": [asdict(factor) for factor in card.held],
        "unit": report.response.unit,
        "unit_name": report.response.unit_name,
        "margin": report.response.margin,
    }
    record["sentences"] = list(report.sentences)
    record["headline"] = report.headline
    if report.findings:
        if report.judged:
            record["best"] = [asdict(line) for line in report.findings.best.contenders]
        record["differences"] = [asdict(line) for line in report.findings.differences]
        record["changes"] = [asdict(line) for line in report.findings.changes]
    return record
