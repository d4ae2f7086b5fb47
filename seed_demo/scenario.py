"""The invented depot: what is true there, study by study.

Osierholm Parts Depot is a warehouse nobody has seen. Minutes per pick tour follow

    minutes = base + walk + batch + start + interactions + shift + noise

with the effects stated below, so that tests can ask what a study should find.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date
from itertools import product

WALK = ("serpentine", "largest gap", "return")
BATCH = ("4", "8", "12")
START = ("front", "back")
SHIFT = ("early", "late")
MARGIN = "0.8"

Levels = Mapping[str, str]


@dataclass(frozen=True)
class Truth:
    """True minutes per tour at one site: a base, what each level adds, what two levels add together, the spread."""

    base: float
    walk: Mapping[str, float]
    batch: Mapping[str, float]
    start: Mapping[str, float]
    together: Mapping[tuple[str, str], float]
    shift: Mapping[str, float]
    sd: float
    wrong_pick: float

    def minutes(self, levels: Levels) -> float:
        """Give the true mean at some levels."""
        alone = (
            self.base
            + self.walk.get(levels.get("walk", ""), 0.0)
            + self.batch.get(levels.get("batch", ""), 0.0)
            + self.start.get(levels.get("start", ""), 0.0)
            + self.shift.get(levels.get("shift", ""), 0.0)
        )
        chosen = set(levels.values())
        return alone + sum(extra for pair, extra in self.together.items() if set(pair) <= chosen)


# At the main hall the largest gap pays above all from the back end: the interaction that is seen again.
MAIN_HALL = Truth(
    base=21.0,
    walk={"serpentine": 0.9, "largest gap": -0.6, "return": 1.5},
    batch={"4": -5.2, "8": 0.0, "12": 6.4},
    start={"front": 0.0, "back": 0.3},
    together={("largest gap", "back"): -2.4, ("return", "12"): 1.6},
    shift={"early": 0.0, "late": 0.5},
    sd=1.3,
    wrong_pick=0.06,
)
# In the annex the back end is the far one: there the same interaction points the other way.
ANNEX = Truth(
    base=17.5,
    walk={"serpentine": 0.4, "largest gap": 0.2, "return": 0.9},
    batch={"4": -4.1, "8": 0.0, "12": 5.0},
    start={"front": 0.0, "back": 0.6},
    together={("largest gap", "back"): 2.2},
    shift={"early": 0.0, "late": 0.2},
    sd=1.1,
    wrong_pick=0.05,
)


@dataclass(frozen=True)
class PlannedStudy:
    """One study of the demo: where, when, what is crossed, how many trials, and what real life did to it."""

    title: str
    question: str
    site: str
    truth: Truth
    starts: date
    factors: Mapping[str, tuple[str, ...]]
    per_cell: int
    block: bool = False
    held: Mapping[str, str] = field(default_factory=dict)
    guard: bool = False
    status: str = "closed"
    close_reason: str = "size_reached"
    close_note: str = ""
    skipped: tuple[Levels, ...] = ()
    share: float = 1.0
    set_aside: Mapping[int, str] = field(default_factory=dict)
    imported: bool = False

    @property
    def cells(self) -> tuple[dict[str, str], ...]:
        """Every combination, the block's levels included."""
        crossed = dict(self.factors) | ({"shift": SHIFT} if self.block else {})
        return tuple(dict(zip(crossed, levels, strict=True)) for levels in product(*crossed.values()))

    def true_mean(self, levels: Levels) -> float:
        """Give the true minutes of one combination, what is held included."""
        return self.truth.minutes({**self.held, **levels})

    def true_difference_of_differences(self, first: tuple[str, str, str], second: tuple[str, str, str]) -> float:
        """Give how much (high - low) of one factor truly changes from (before) to (after) of another.

        Each argument is (factor, earlier level, later level). Averaged equally over all else.
        """
        (one, low, high), (other, before, after) = first, second
        rest = [cell for cell in self.cells if cell[one] == low and cell[other] == before]

        def mean(level: str, beside: str) -> float:
            return sum(self.true_mean({**cell, one: level, other: beside}) for cell in rest) / len(rest)

        return (mean(high, after) - mean(low, after)) - (mean(high, before) - mean(low, before))


STUDIES: tuple[PlannedStudy, ...] = (
    PlannedStudy(
        title="Walk, batch and start, winter",
        question="Which walk is fastest, and does it depend on the batch or on the end a tour starts from?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2026, 1, 12),
        factors={"walk": WALK, "batch": BATCH, "start": START},
        per_cell=12,
        guard=True,
        set_aside={17: "aisle 4 blocked by a delivery", 58: "scanner restarted half way"},
    ),
    PlannedStudy(
        title="Walk and start by shift, spring",
        question="Does the largest gap still pay from the back end when early and late shifts are told apart?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2026, 4, 13),
        factors={"walk": WALK, "start": START},
        per_cell=14,
        block=True,
        held={"batch": "8"},
        imported=True,
    ),
    PlannedStudy(
        title="Walk and start, annex",
        question="Does what holds in the main hall hold in the annex?",
        site="Annex",
        truth=ANNEX,
        starts=date(2026, 6, 1),
        factors={"walk": WALK, "start": START},
        per_cell=30,
        close_reason="early",
        close_note="the annex was needed for the stock count",
        share=0.6,
    ),
    PlannedStudy(
        title="Walk and batch, annex, autumn",
        question="Do large batches suit the annex?",
        site="Annex",
        truth=ANNEX,
        starts=date(2026, 9, 7),
        factors={"walk": ("serpentine", "largest gap"), "batch": BATCH},
        per_cell=20,
        guard=True,
        skipped=({"walk": "serpentine", "batch": "12"},),
        close_reason="extended",
        close_note="ran on in the hope of a trolley for serpentine tours of 12; it never came",
    ),
    PlannedStudy(
        title="Walk, batch and start, autumn",
        question="Is the winter result still true after the new racks?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2026, 10, 26),
        factors={"walk": WALK, "batch": BATCH, "start": START},
        per_cell=12,
        guard=True,
        status="running",
        share=0.55,
        set_aside={9: "order list was wrong"},
    ),
    PlannedStudy(
        title="Start by shift, next winter",
        question="Is the back end slower in the late shift?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2027, 1, 11),
        factors={"walk": ("largest gap", "return"), "start": START},
        per_cell=16,
        block=True,
        held={"batch": "8"},
        status="planned",
    ),
)
