"""A re-seeded depot comes to the verdicts its generator planted."""

from __future__ import annotations

from collections import Counter, defaultdict
from fractions import Fraction
from random import Random

from registry.services.study_plan import TUNING
from registry.synthesis.contributions import Contribution, FactorPart, Standing
from registry.synthesis.recurrence import board
from registry.trials.factors import Factor
from registry.trials.layouts import Layout
from registry.trials.tallies import EMPTY, TalliedStudy, Tally
from seed_demo.building import STEP, tours_of
from seed_demo.scenario import MARGIN, PLANTED, RENAMED, SHIFT, STUDIES, PlannedStudy

SERIES = 100
STANDING: dict[str, Standing] = {"size_reached": "full", "early": "early", "extended": "extended"}


def known(level: str) -> str:
    return RENAMED[0] if level == RENAMED[1] else level


def tallied(planned: PlannedStudy, rng: Random) -> Contribution:
    """Run a study's tours straight into tallies, without a database."""
    step = Fraction(STEP[planned.unit])
    tallies: dict[tuple[int, ...], Tally] = defaultdict(lambda: EMPTY)
    for tour in tours_of(planned, rng):
        cell = tuple(levels.index(tour.levels[factor]) for factor, levels in planned.factors.items())
        key = (SHIFT.index(tour.levels["shift"]), *cell) if planned.block else cell
        tallies[key] = tallies[key].add(int(Fraction(tour.reading) / step))
    factors = tuple(Factor(name, levels) for name, levels in planned.factors.items())
    layout = Layout(factors, Factor("shift", SHIFT) if planned.block else None)
    parts = [FactorPart(name, "treatment", tuple(map(known, levels))) for name, levels in planned.factors.items()]
    if planned.block:
        parts.append(FactorPart("shift", "block", SHIFT))
    parts += [FactorPart(name, "held", (level,)) for name, level in planned.held.items()]
    return Contribution(
        key=planned.title,
        title=planned.title,
        tallied=TalliedStudy(layout, step, 0, dict(tallies)),
        parts=tuple(parts),
        error="pooled" if planned.block or planned.spread == "shared" else "per-cell",
        scale=Fraction(1, 60) if planned.unit == "s" else Fraction(1),
        standing=STANDING[planned.close_reason],
        per_cell=planned.per_cell,
        tuning=float(TUNING),
        in_order=not planned.imported,
    )


def test_each_planted_interaction_gets_its_true_verdict_in_nine_of_ten_series() -> None:
    closed = [planned for planned in STUDIES if planned.status == "closed"]
    right: Counter[int] = Counter()
    for seed in range(SERIES):
        studies = [tallied(planned, Random(f"{seed}/{place}")) for place, planned in enumerate(closed)]
        verdicts = {
            (tuple(each.corners), tuple(each.corners.values())): each.verdict
            for each in board(studies, margin=float(MARGIN["min"])).recurrences
        }
        for at, planted in enumerate(PLANTED):
            right[at] += verdicts[planted.factors, planted.levels] == planted.verdict

    assert {planted.verdict for planted in PLANTED} == {"seen_again", "opposite", "once", "small"}
    assert all(right[at] >= 90 for at in range(len(PLANTED))), dict(right)


def test_the_planted_interactions_are_what_the_generator_says_is_true() -> None:
    margin = float(MARGIN["min"])
    for planted in PLANTED:
        (one, other), (levels, beside) = planted.factors, planted.levels
        truths = [
            planned.true_difference_of_differences((one, *levels), (other, *beside))
            for planned in STUDIES
            if planned.status == "closed" and _crosses(planned, planted.factors, planted.levels)
        ]
        beyond = [truth for truth in truths if abs(truth) > margin]
        signs = {truth > 0 for truth in beyond}
        match planted.verdict:
            case "seen_again":
                assert (len(beyond), len(signs)) == (len(truths), 1)
            case "opposite":
                assert len(signs) == 2
            case "once":
                assert len(beyond) == 1
            case _:
                assert beyond == []


def _crosses(planned: PlannedStudy, factors: tuple[str, str], levels: tuple[tuple[str, str], tuple[str, str]]) -> bool:
    has = {name: set(map(known, of_factor)) for name, of_factor in planned.factors.items()}
    return all(set(pair) <= has.get(factor, set()) for factor, pair in zip(factors, levels, strict=True))
