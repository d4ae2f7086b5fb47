"""The invented depot: what is true there, study by study.

Osierholm Parts Depot is a warehouse nobody has seen. Minutes per pick tour follow

    minutes = base + walk + batch + start + interactions + shift + noise

with the effects stated below, so that tests can ask what a study should find, and what
all of them together should.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date
from itertools import product
from typing import Literal

WALK = ("serpentine", "largest gap", "return")
# From the winter of 2026 on the crews call the return walk by another name; it is the same walk.
RENAMED = ("return", "there and back")
BATCH = ("4", "8", "12")
START = ("front", "back")
SHIFT = ("early", "late")
MARGIN = {"min": "0.8", "s": "48"}

Levels = Mapping[str, str]
Pair = tuple[str, str]


@dataclass(frozen=True)
class Truth:
    """True minutes per tour at one site: a base, what each level adds, what two levels add together, the spread."""

    base: float
    walk: Mapping[str, float]
    batch: Mapping[str, float]
    start: Mapping[str, float]
    together: Mapping[Pair, float]
    shift: Mapping[str, float]
    sd: float
    wrong_pick: float

    def minutes(self, levels: Levels, together: Mapping[Pair, float] | None = None) -> float:
        """Give the true mean at some levels; ``together`` adds what was true for a while."""
        alone = (
            self.base
            + self.walk.get(levels.get("walk", ""), 0.0)
            + self.batch.get(levels.get("batch", ""), 0.0)
            + self.start.get(levels.get("start", ""), 0.0)
            + self.shift.get(levels.get("shift", ""), 0.0)
        )
        chosen = set(levels.values())
        extras = [*self.together.items(), *(together or {}).items()]
        return alone + sum(extra for pair, extra in extras if set(pair) <= chosen)


# In both halls the largest gap pays from the back end: the interaction that is seen again. In the
# main hall the return walk suffers from the back, in the annex, whose far end is its front, it gains.
MAIN_HALL = Truth(
    base=21.0,
    walk={"serpentine": 0.9, "largest gap": 0.2, "return": 0.6, "zigzag": 1.4},
    batch={"4": -5.2, "8": 0.0, "12": 6.4},
    start={"front": 0.0, "back": 0.3},
    together={("largest gap", "back"): -2.4, ("return", "back"): 2.2},
    shift={"early": 0.0, "late": 0.5},
    sd=0.75,
    wrong_pick=0.06,
)
ANNEX = Truth(
    base=17.5,
    walk={"serpentine": 0.4, "largest gap": 0.6, "return": 0.9},
    batch={"4": -4.1, "8": 0.0, "12": 5.0},
    start={"front": 0.0, "back": 0.6},
    together={("largest gap", "back"): -2.0, ("return", "back"): -2.6},
    shift={"early": 0.0, "late": 0.2},
    sd=0.65,
    wrong_pick=0.05,
)
# While the packing desk at the back was shut, tours of 12 that started there waited for a trolley.
DESK_SHUT = {("back", "12"): 2.6}


@dataclass(frozen=True)
class Decided:
    """What the depot decided on a study, and what was said of it later."""

    what: str
    from_day: str
    saving: str
    saving_unit: str
    review_day: str
    held: str = ""
    held_note: str = ""


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
    unit: Literal["min", "s"] = "min"
    together: Mapping[Pair, float] = field(default_factory=dict)
    block: bool = False
    held: Mapping[str, str] = field(default_factory=dict)
    guard: bool = False
    status: str = "closed"
    close_reason: str = "size_reached"
    close_note: str = ""
    spread: str = ""
    never_run: tuple[Levels, ...] = ()
    why_never: str = ""
    skipped_runs: Mapping[int, str] = field(default_factory=dict)
    more: Mapping[Pair, int] = field(default_factory=dict)
    share: float = 1.0
    set_aside: Mapping[int, str] = field(default_factory=dict)
    imported: bool = False
    renames: bool = False
    decision: Decided | None = None

    @property
    def cells(self) -> tuple[dict[str, str], ...]:
        """Every combination, the block's levels included."""
        crossed = dict(self.factors) | ({"shift": SHIFT} if self.block else {})
        return tuple(dict(zip(crossed, levels, strict=True)) for levels in product(*crossed.values()))

    def true_mean(self, levels: Levels) -> float:
        """Give the true minutes of one combination, what is held included; a renamed level is the same level."""
        old_name, new_name = RENAMED
        known = {name: old_name if level == new_name else level for name, level in {**self.held, **levels}.items()}
        return self.truth.minutes(known, self.together)

    def true_difference_of_differences(self, first: tuple[str, str, str], second: tuple[str, str, str]) -> float:
        """Give how much (high - low) of one factor truly changes from (before) to (after) of another, in minutes.

        Each argument is (factor, earlier level, later level). Averaged equally over all else.
        """
        (one, low, high), (other, before, after) = first, second
        rest = [cell for cell in self.cells if cell[one] == self.cells[0][one] and cell[other] == self.cells[0][other]]

        def mean(level: str, beside: str) -> float:
            return sum(self.true_mean({**cell, one: level, other: beside}) for cell in rest) / len(rest)

        return (mean(high, after) - mean(low, after)) - (mean(high, before) - mean(low, before))


@dataclass(frozen=True)
class PlantedInteraction:
    """An interaction contrast that the depot was given, and the verdict its studies should come to."""

    factors: Pair
    levels: tuple[Pair, Pair]
    verdict: str


PLANTED: tuple[PlantedInteraction, ...] = (
    PlantedInteraction(("walk", "start"), (("serpentine", "largest gap"), START), "seen_again"),
    PlantedInteraction(("walk", "start"), (("serpentine", "return"), START), "opposite"),
    PlantedInteraction(("batch", "start"), (("8", "12"), START), "once"),
    PlantedInteraction(("batch", "start"), (("4", "8"), START), "small"),
)


STUDIES: tuple[PlannedStudy, ...] = (
    PlannedStudy(
        title="Walk, batch and start, autumn 2024",
        question="Which walk is fastest, and does it depend on the batch or on the end a tour starts from?",
        site="Main hall",
        truth=MAIN_HALL,
        together=DESK_SHUT,
        starts=date(2024, 10, 14),
        factors={"walk": WALK, "batch": BATCH, "start": START},
        per_cell=24,
        # Tours of 12 by serpentine were the day's habit, so some more of them were logged than planned.
        more={("serpentine", "12"): 3},
        set_aside={17: "aisle 4 blocked by a delivery", 58: "scanner restarted half way"},
        decision=Decided(
            what="Tours that start at the back walk by the largest gap.",
            from_day="2024-11-11",
            saving="2.1",
            saving_unit="min a tour",
            review_day="2025-02-03",
            held="partly",
            held_note="It holds where the batch is 4 or 8; tours of 12 waited for the packing desk.",
        ),
    ),
    PlannedStudy(
        title="Walk and start by shift, winter 2025",
        question="Does the largest gap still pay from the back end when early and late shifts are told apart?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2025, 1, 20),
        factors={"walk": WALK, "start": START},
        per_cell=12,
        block=True,
        held={"batch": "8"},
        imported=True,
    ),
    PlannedStudy(
        title="Walk, batch and start, annex, spring 2025",
        question="Does what holds in the main hall hold in the annex?",
        site="Annex",
        truth=ANNEX,
        starts=date(2025, 4, 14),
        factors={"walk": WALK, "batch": BATCH, "start": START},
        per_cell=24,
        unit="s",
    ),
    PlannedStudy(
        title="A fourth walk, summer 2025",
        question="Is a zigzag through the aisles worth learning?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2025, 7, 7),
        factors={"walk": (*WALK, "zigzag"), "batch": BATCH[1:], "start": START},
        per_cell=24,
        guard=True,
    ),
    PlannedStudy(
        title="Walk and start, annex, autumn 2025",
        question="Does the annex keep its gain from the back end in the busy season?",
        site="Annex",
        truth=ANNEX,
        starts=date(2025, 10, 6),
        factors={"walk": WALK, "start": START},
        held={"batch": "8"},
        per_cell=30,
        unit="s",
        spread="shared",
        close_reason="early",
        close_note="the annex was needed for the stock count",
        share=0.6,
    ),
    PlannedStudy(
        title="Walk, batch and start, winter 2026",
        question="Is the first autumn's result still true now that the packing desk is open again?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2026, 1, 12),
        factors={"walk": (*WALK[:2], RENAMED[1]), "batch": BATCH, "start": START},
        per_cell=24,
        guard=True,
        set_aside={31: "picker was called away half way"},
        decision=Decided(
            what="Back-start tours go by the largest gap for every batch, now that the packing desk is open again.",
            from_day="2026-02-09",
            saving="2.4",
            saving_unit="min a tour",
            review_day="2026-08-03",
        ),
        renames=True,
    ),
    PlannedStudy(
        title="Walk and batch, annex, spring 2026",
        question="Do large batches suit the annex?",
        site="Annex",
        truth=ANNEX,
        starts=date(2026, 4, 13),
        factors={"walk": WALK[:2], "batch": BATCH},
        held={"start": "front"},
        per_cell=20,
        unit="s",
        guard=True,
        never_run=({"walk": "serpentine", "batch": "12"},),
        why_never="no trolley in the annex holds 12 orders on a serpentine",
        close_reason="extended",
        close_note="ran on in the hope of a trolley for serpentine tours of 12; it never came",
    ),
    PlannedStudy(
        title="Walk, batch and start, autumn 2026",
        question="Is the winter's result still true with the new racks?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2026, 10, 26),
        factors={"walk": (*WALK[:2], RENAMED[1]), "batch": BATCH, "start": START},
        per_cell=12,
        guard=True,
        status="running",
        share=0.55,
        set_aside={9: "order list was wrong"},
        skipped_runs={40: "the conveyor stood still"},
    ),
    PlannedStudy(
        title="Start by shift, next winter",
        question="Is the back end slower in the late shift?",
        site="Main hall",
        truth=MAIN_HALL,
        starts=date(2027, 1, 11),
        factors={"walk": ("largest gap", RENAMED[1]), "start": START},
        per_cell=16,
        block=True,
        held={"batch": "8"},
        status="planned",
    ),
)
