"""Whatever happens to its trials, a study's tallies equal a recount in Python integers."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from typing import ClassVar

import pytest
from hypothesis import HealthCheck, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, precondition, rule
from sqlalchemy import select

from registry.errors import InputRefused
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.study_start import ResponseDraft
from registry.services.trial_edit import (
    change_step,
    correct_reading,
    restore_reading,
    restore_trial,
    set_aside_reading,
    set_aside_trial,
)
from registry.services.trial_import import read_upload, run_import
from registry.services.upkeep import recount
from registry.storage.frame import fetch_frame
from registry.storage.tables import TallyRow
from registry.storage.tallies import TallyKey, change_tallies, fetch_tallies
from registry.storage.units import write_study
from registry.trials.tallies import LIMB, Tally
from tests.support.studies import MINUTES, NOW, SHIFT, START, WALK, Place, a_study

WALKS = st.sampled_from(WALK.levels)
STARTS = st.sampled_from(START.levels)
SHIFTS = st.sampled_from(SHIFT.levels)
# Far enough apart for squares to pass one limb; near enough that two steps ten times finer, and a reading at the
# other end, stay within 2**36 steps of the anchor.
READINGS = st.integers(-(2**28), 2**28)
SECOND = ResponseDraft(
    name="metres", about="metres walked", unit="m", step="1", margin="", wanted="lower", kind="measured", part="primary"
)


class LivesOfTrials(RuleBasedStateMachine):
    """Logs, corrects, sets aside, restores, imports and refines at random, beside a plain Python model."""

    make_database: ClassVar[Callable[[], Database]]

    def __init__(self) -> None:
        super().__init__()
        self.database = self.make_database()
        self.place: Place = a_study(self.database, factors=(WALK, START, SHIFT), responses=(MINUTES, SECOND))
        self.trials: dict[int, dict[str, object]] = {}
        self.unit = {"minutes": 10, "metres": 1}  # Steps in one whole unit.
        self.keys = 0

    def teardown(self) -> None:
        self.database.dispose()

    def written(self, response: str, steps: int) -> str:
        """Write a number of the response's present steps as a person would type it."""
        whole, rest = divmod(abs(steps), self.unit[response])
        digits = len(str(self.unit[response])) - 1
        return f"{'-' if steps < 0 else ''}{whole}" + (f".{rest:0{digits}d}" if digits else "")

    def remember(self, cell: tuple[str, str, str], readings: dict[str, int]) -> None:
        self.trials[len(self.trials) + 1] = {
            "cell": cell, "kept": True, "readings": {name: [steps, True] for name, steps in readings.items()},
        }  # fmt: skip

    @rule(walk=WALKS, start=STARTS, shift=SHIFTS, minutes=READINGS, metres=st.none() | READINGS)
    def log(self, walk: str, start: str, shift: str, minutes: int, metres: int | None) -> None:
        self.keys += 1
        readings = {"minutes": minutes} | ({} if metres is None else {"metres": metres})
        texts = {name: self.written(name, steps) for name, steps in readings.items()}
        self.place.log({"walk": walk, "start": start, "shift": shift}, texts, key=self.keys)
        self.remember((walk, start, shift), readings)

    @rule(rows=st.lists(st.tuples(WALKS, STARTS, SHIFTS, READINGS), min_size=1, max_size=6))
    def take_in_a_file(self, rows: list[tuple[str, str, str, int]]) -> None:
        lines = [f"{walk},{start},{shift},{self.written('minutes', steps)}" for walk, start, shift, steps in rows]
        content = "\n".join(["walk,start,shift,minutes", *lines]).encode()
        job = read_upload(
            self.database, self.place.keeper, self.place.study_id, name="tours.csv", content=content, now=NOW
        )
        choices = [ColumnChoice("factor", name) for name in ("walk", "start", "shift")]
        run_import(
            self.database, self.place.keeper, self.place.study_id, job,
            choices=[*choices, ColumnChoice("response", "minutes")], round_offered=False, again=True, now=NOW,
        )  # fmt: skip
        for walk, start, shift, steps in rows:
            self.remember((walk, start, shift), {"minutes": steps})

    @precondition(lambda self: self.trials)
    @rule(pick=st.randoms(use_true_random=False), response=st.sampled_from(["minutes", "metres"]), steps=READINGS)
    def correct(self, pick: object, response: str, steps: int) -> None:
        number = pick.choice(sorted(self.trials))  # type: ignore[attr-defined]
        readings = self.trials[number]["readings"]
        was = readings.get(response)  # type: ignore[attr-defined]
        if was is not None and was[0] == steps:
            return
        correct_reading(
            self.database, self.place.keeper, self.place.study_id, number,
            response=response, text=self.written(response, steps), reason="misread", now=NOW,
        )  # fmt: skip
        readings[response] = [steps, True if was is None else was[1]]  # type: ignore[index]

    @precondition(lambda self: self.trials)
    @rule(pick=st.randoms(use_true_random=False))
    def turn_a_trial(self, pick: object) -> None:
        number = pick.choice(sorted(self.trials))  # type: ignore[attr-defined]
        trial = self.trials[number]
        turn = set_aside_trial if trial["kept"] else restore_trial
        turn(self.database, self.place.keeper, self.place.study_id, number, reason="aisle blocked", now=NOW)
        trial["kept"] = not trial["kept"]

    @precondition(lambda self: self.trials)
    @rule(pick=st.randoms(use_true_random=False))
    def turn_a_reading(self, pick: object) -> None:
        number = pick.choice(sorted(self.trials))  # type: ignore[attr-defined]
        readings = self.trials[number]["readings"]
        response = pick.choice(sorted(readings))  # type: ignore[attr-defined, call-overload]
        turn = set_aside_reading if readings[response][1] else restore_reading  # type: ignore[index]
        turn(
            self.database, self.place.keeper, self.place.study_id, number,
            response=response, reason="watch stopped", now=NOW,
        )  # fmt: skip
        readings[response][1] = not readings[response][1]  # type: ignore[index]

    @precondition(lambda self: self.unit["minutes"] < 1000)
    @rule()
    def take_a_finer_step(self) -> None:
        finer = self.unit["minutes"] * 10
        change_step(
            self.database, self.place.keeper, self.place.study_id,
            response="minutes", step="0." + "0" * (len(str(finer)) - 2) + "1", reason="new watch", now=NOW,
        )  # fmt: skip
        self.unit["minutes"] = finer
        for trial in self.trials.values():
            if "minutes" in trial["readings"]:  # type: ignore[operator]
                trial["readings"]["minutes"][0] *= 10  # type: ignore[index]

    @invariant()
    def tallies_equal_a_count_in_python(self) -> None:
        with self.database.read() as session:
            frame = fetch_frame(session, self.place.study_id)
            for response in frame.responses:
                expected: dict[int, Tally] = defaultdict(lambda: Tally(0, 0, 0))
                for trial in self.trials.values():
                    reading = trial["readings"].get(response.name)  # type: ignore[attr-defined]
                    if reading is not None and reading[1] and trial["kept"]:
                        levels = dict(zip(("walk", "start", "shift"), trial["cell"], strict=True))  # type: ignore[call-overload]
                        ranks = tuple(factor.known_as[levels[factor.name]] for factor in frame.chosen)
                        cell = frame.cells[ranks]
                        d = reading[0] - (response.anchor or 0)
                        was = expected[cell]
                        expected[cell] = Tally(was.n + 1, was.total + d, was.squares + d * d)
                found = fetch_tallies(session, self.place.study_id, response.response_id)
                assert {cell: tally for cell, tally in found.items() if tally.n} == dict(expected)
            limbs = session.execute(select(TallyRow.squares_high, TallyRow.squares_low)).all()
            assert all(high >= 0 and 0 <= low < LIMB for high, low in limbs)

    @invariant()
    def a_recount_finds_nothing_wrong(self) -> None:
        assert recount(self.database).faults == ()


@pytest.mark.parametrize("dialect", ["sqlite", "postgresql"])
def test_tallies_equal_a_recount_after_any_history(dialect: str, make_database: Callable[[str], Database]) -> None:
    machine = type("Lives", (LivesOfTrials,), {"make_database": staticmethod(lambda: make_database(dialect))})
    machine.TestCase.settings = settings(
        max_examples=12 if dialect == "postgresql" else 25,
        stateful_step_count=20,
        deadline=None,
        suppress_health_check=list(HealthCheck),
    )
    machine.TestCase("runTest").runTest()


@pytest.mark.parametrize(
    "changes", [[2**72, 2**72, -(2**72)], [LIMB - 1, 1, -LIMB], [5 * LIMB + 7, -(4 * LIMB), 2**98]]
)
def test_squares_carry_between_the_limbs_and_stay_canonical(database: Database, changes: list[int]) -> None:
    place = a_study(database)
    expected = 0

    for squares in changes:
        expected += squares
        with write_study(database, place.study_id, person_id=place.keeper.id, now=NOW) as unit:
            response = fetch_frame(unit.session, place.study_id).responses[0].response_id
            # One more reading each time, so that the tally is never empty with squares left over.
            change_tallies(unit.session, place.study_id, {TallyKey(response, 1): Tally(1, 0, squares)})

    with database.read() as session:
        assert fetch_tallies(session, place.study_id, response) == {1: Tally(len(changes), 0, expected)}
        low = session.scalars(select(TallyRow.squares_low)).one()
    assert 0 <= low < LIMB


def test_a_cell_that_is_full_refuses_more_readings(database: Database) -> None:
    place = a_study(database)
    with write_study(database, place.study_id, person_id=place.keeper.id, now=NOW) as unit:
        response = fetch_frame(unit.session, place.study_id).responses[0].response_id
        change_tallies(unit.session, place.study_id, {TallyKey(response, 1): Tally(2**27 - 1, 0, 0)})

    with pytest.raises(InputRefused, match="a combination already holds 134217727 readings"):
        place.log({"walk": "serpentine", "start": "front"}, {"minutes": "7.1"}, key=1)
