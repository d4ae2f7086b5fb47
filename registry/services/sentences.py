"""Plain sentences made from a decomposition; they never claim more than its findings."""

from __future__ import annotations

from collections.abc import Iterator

from registry.analysis.findings import Finding, judge_difference, judge_interaction
from registry.analysis.results import Comparison, Decomposition, InteractionContrast
from registry.analysis.undefined import Number, Undefined
from registry.services.amounts import amount, unit_words
from registry.services.best_combination import BestCombination
from registry.services.study_card import ResponseLine, StudyCard

MOST_SAID = 3
# What takes time is said to take it; anything else is said to read.
TIMES = frozenset({"s", "ms", "min", "h", "d", "min_per", "s_per"})


def may_judge(card: StudyCard) -> bool:
    """Whether findings may be given: the study reached the size that was planned before it began.

    While it runs, and when it closed early or late, an ordinary interval promises too much,
    because whoever looked may have stopped at a lucky moment.
    """
    return card.status == "closed" and card.close_reason == "size_reached" and card.plan is not None


def why_not_judged(card: StudyCard) -> str:
    """Say why a study gets no findings, when it gets none."""
    if card.status == "running":
        return (
            "Findings are given when the study closes at its planned size. Until then read the intervals below"
            " as a first look: looking often makes an ordinary interval promise too much."
        )
    if card.status == "closed" and card.plan is None:
        return "No plan was locked before the first trial, so this study explores: no findings are given."
    if card.status == "closed":
        reason = "early" if card.close_reason == "early" else "after it was extended"
        return (
            f"The study was closed {reason}, so an ordinary interval promises too much: read the intervals below"
            " with care; no findings are given."
        )
    return ""


def sentences_of(
    card: StudyCard, response: ResponseLine, result: Decomposition, *, best: BestCombination
) -> Iterator[str]:
    """Say what a study found in one response, the plainest first."""
    yield _size(card, response, result)
    mean = result.equal_weight
    if not isinstance(mean.estimate, Undefined):
        spoken = f"{amount(mean.estimate, response)} {unit_words(response)}"
        yield f"The grand mean is {spoken}{_range(mean.lower, mean.upper, response)}."
    if not may_judge(card):
        reason = why_not_judged(card)
        if reason:
            yield reason
        return
    yield from best.sentences
    yield from _findings(response, result)


def headline_of(card: StudyCard, response: ResponseLine, result: Decomposition, *, best: BestCombination) -> str:
    """Say in one sentence what a study found: the best combination, its largest finding, or why there is none."""
    if may_judge(card) and best.sentences:
        return best.sentences[0]
    if may_judge(card):
        return next(_findings(response, result), "It crossed one level alone, so there is nothing to compare.")
    if card.status != "closed":
        return f"It is {card.status}: nothing is judged yet."
    if card.plan is None:
        return "It explored without a plan, so nothing is judged."
    how = "early" if card.close_reason == "early" else "after it was extended"
    return f"It was closed {how}, so nothing is judged."


def _size(card: StudyCard, response: ResponseLine, result: Decomposition) -> str:
    planned = f" of {card.plan.planned} planned" if card.plan else ""
    aside = f"; {card.set_aside} set aside" if card.set_aside else ""
    return f"{card.logged}{planned} trials are logged{aside}; {result.trials} readings of {response.name} count."


def _findings(response: ResponseLine, result: Decomposition) -> Iterator[str]:
    margin = float(response.margin) if response.margin else None
    differences = [(judge_difference(result, pair, margin=margin), pair) for pair in result.comparisons]
    told = [(finding, pair) for finding, pair in differences if finding.code in ("act", "real")]
    told.sort(key=lambda each: -abs(_value(each[0].estimate)))
    for finding, pair in told[:MOST_SAID]:
        varies = _varies_with(pair.factor, result, margin=margin)
        yield f"{_difference(finding, pair, response)}{_averaged(pair.factor, result)}: {finding.words}{varies}."
    changes = [(judge_interaction(result, each, margin=margin), each) for each in result.interactions]
    real = [(finding, each) for finding, each in changes if finding.code in ("act", "real")]
    real.sort(key=lambda each: -abs(_value(each[0].estimate)))
    for finding, each in real[:MOST_SAID]:
        yield f"{_interaction(finding, each, response)}: {finding.words}."
    hidden = [
        pair.factor
        for finding, pair in differences
        if finding.code in ("small", "unsettled") and _varies_with(pair.factor, result, margin=margin)
    ]
    for factor in dict.fromkeys(hidden):
        varies = _varies_with(factor, result, margin=margin).removeprefix("; it ")
        yield f"What {factor} does {varies}, so its average says little."
    quiet = sum(finding.code == "small" for finding, _ in [*differences, *changes])
    open_ = sum(finding.code == "unsettled" for finding, _ in [*differences, *changes])
    if quiet:
        yield f"{_count(quiet)} too small to matter."
    if open_:
        yield f"{_count(open_)} not settled."
    if margin is None:
        yield "No margin that matters was stated, so only directions are judged."


def _averaged(factor: str, result: Decomposition) -> str:
    """Say what a difference between two levels is averaged over."""
    others = [each.name for each in result.layout.factors if each.name != factor]
    return f", averaged over {' and '.join(others)}" if others else ""


def _varies_with(factor: str, result: Decomposition, *, margin: float | None) -> str:
    """Name the factors that a difference is found to depend on."""
    found = [
        other
        for contrast in result.interactions
        if factor in contrast.factors and judge_interaction(result, contrast, margin=margin).code in ("act", "real")
        for other in contrast.factors
        if other != factor
    ]
    return f"; it varies with {' and '.join(dict.fromkeys(found))}" if found else ""


def _count(number: int) -> str:
    return "1 contrast is" if number == 1 else f"{number} contrasts are"


def _difference(finding: Finding, pair: Comparison, response: ResponseLine) -> str:
    value = _value(finding.estimate)
    verb = "takes" if response.unit in TIMES else "reads"
    more = "more" if value > 0 else "less"
    return (
        f"{pair.factor} {pair.to_level} {verb} {amount(abs(value), response)} {unit_words(response)} {more} than"
        f" {pair.from_level}{_range(finding.lower, finding.upper, response, turned=value < 0)}"
    )


def _interaction(finding: Finding, each: InteractionContrast, response: ResponseLine) -> str:
    (low, high), (before, after) = each.levels
    one, other = each.factors
    value = _value(finding.estimate)
    change = "rises" if value > 0 else "falls"
    return (
        f"From {other} {before} to {after}, what {one} {high} reads over {low} {change} by"
        f" {amount(abs(value), response)} {unit_words(response)}"
        f"{_range(finding.lower, finding.upper, response, turned=value < 0)}"
    )


def _value(number: Number) -> float:
    return 0.0 if isinstance(number, Undefined) else number


def _range(lower: Number, upper: Number, response: ResponseLine, *, turned: bool = False) -> str:
    if isinstance(lower, Undefined) or isinstance(upper, Undefined):
        return ""
    if turned:
        lower, upper = -upper, -lower
    return f" ({amount(lower, response)} to {amount(upper, response)})"
