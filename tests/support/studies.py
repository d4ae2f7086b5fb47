"""People, series and studies made through the services, as a person would make them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from itertools import product
from uuid import UUID, uuid5

from sqlalchemy import update

from registry.services.levels import rename_level, series_levels
from registry.services.opening import Database
from registry.services.people import Person, add_person
from registry.services.series_pages import SeriesDraft, new_series
from registry.services.settings import PasswordCost
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study
from registry.services.study_start import FactorDraft, ResponseDraft, StudyDraft, new_study
from registry.services.trial_edit import correct_reading
from registry.services.trial_log import TrialEntry, log_trials
from registry.storage.tables import Person as PersonRow

NOW = datetime(2026, 3, 2, 9, 0, tzinfo=UTC)
CHEAP = PasswordCost(time=1, memory_kib=8, lanes=1)
PASSWORD = "a long enough password"
_KEYS = UUID("6f1d3c52-0f3b-4f5e-9a67-0d6d5d8b0a11")

WALK = FactorDraft("walk", "treatment", ("serpentine", "largest gap", "return"))
START = FactorDraft("start", "treatment", ("front", "back"))
SHIFT = FactorDraft("shift", "block", ("early", "late"))
MINUTES = ResponseDraft(
    name="minutes", about="minutes per tour", unit="min", step="0.1", margin="0.8", wanted="lower", kind="measured",
    part="primary",
)  # fmt: skip
WRONG_PICK = ResponseDraft(
    name="wrong pick", about="whether the tour had a wrong pick", unit="count", step="1", margin="", wanted="lower",
    kind="yes_no", part="guard",
)  # fmt: skip


@dataclass(frozen=True)
class Place:
    """A registry with one keeper and one study, and the calls tests make most."""

    database: Database
    keeper: Person
    series_id: int
    study_id: int

    def log(self, levels: Mapping[str, str], readings: Mapping[str, str], *, key: int) -> int:
        """Log one trial under a key made from a number; returns the trial's number."""
        entry = TrialEntry(key=key_of(key), levels=levels, readings=readings, happened_at=NOW)
        return log_trials(self.database, self.keeper, self.study_id, [entry], now=NOW)[0].number


def key_of(number: int) -> str:
    """Give a client key that stands for a number."""
    return str(uuid5(_KEYS, str(number)))


def a_keeper(database: Database, *, address: str = "keeper@example.org") -> Person:
    """Add a keeper of the registry."""
    return add_person(
        database, name="Kim Keeper", address=address, password=PASSWORD, keeper=True, now=NOW, hashing=CHEAP
    )


def a_study(
    database: Database,
    *,
    factors: Sequence[FactorDraft] = (WALK, START),
    responses: Sequence[ResponseDraft] = (MINUTES,),
    started: bool = True,
) -> Place:
    """Make a keeper, a series and a study in it, running unless said otherwise."""
    keeper = a_keeper(database)
    series_id = new_series(database, keeper, SeriesDraft("Pick tours", "How tours are walked"), now=NOW)
    study_id = another_study(database, keeper, series_id, factors=factors, responses=responses, started=started)
    return Place(database, keeper, series_id, study_id)


def another_study(
    database: Database,
    keeper: Person,
    series_id: int,
    *,
    title: str = "Walk and start",
    factors: Sequence[FactorDraft] = (WALK, START),
    responses: Sequence[ResponseDraft] = (MINUTES,),
    started: bool = True,
) -> int:
    """Make one more study in a series."""
    draft = StudyDraft(
        title=title,
        question="Which walk is fastest from which end?",
        site="Osierholm",
        time_zone="Europe/Copenhagen",
        factors=tuple(factors),
        responses=tuple(responses),
    )
    study_id = new_study(database, keeper, series_id, draft, now=NOW)
    if started:
        start_study(database, keeper, study_id, now=NOW + timedelta(minutes=1))
    return study_id


def close_a_study(
    place: Place,
    *,
    title: str,
    factors: Sequence[FactorDraft] = (WALK, START),
    responses: Sequence[ResponseDraft] = (MINUTES,),
    readings: Mapping[tuple[str, ...], Sequence[str]],
    starts: datetime = NOW,
    site: str = "Osierholm",
    reason: str = "size_reached",
    planned: int | None = None,
) -> int:
    """Plan, start, log and close a study; ``readings`` are of the first response, by the levels a trial states.

    The plan promises as many trials a combination as the first one has, or none when it
    is 0: then the study explores and is closed early.
    """
    draft = StudyDraft(title, "Which walk is fastest?", site, "Europe/Copenhagen", tuple(factors), tuple(responses))
    study_id = new_study(place.database, place.keeper, place.series_id, draft, now=starts)
    per_cell = planned if planned is not None else len(next(iter(readings.values())))
    if per_cell:
        lock_plan(place.database, place.keeper, study_id, PlanDraft(str(per_cell)), now=starts)
    start_study(place.database, place.keeper, study_id, now=starts)
    stated = [factor.name for factor in factors if factor.role != "held"]
    entries = [
        TrialEntry(
            key=str(uuid5(_KEYS, f"{title}/{levels}/{turn}")),
            levels=dict(zip(stated, levels, strict=True)),
            readings={responses[0].name: text},
            happened_at=starts,
        )
        for levels, texts in readings.items()
        for turn, text in enumerate(texts)
    ]
    for first in range(0, len(entries), 100):
        log_trials(place.database, place.keeper, study_id, entries[first : first + 100], now=starts)
    note = "" if reason == "size_reached" else "as the test wants"
    close_study(place.database, place.keeper, study_id, reason=reason, note=note, now=starts + timedelta(days=1))
    return study_id


def even_readings(
    crossed: Sequence[Sequence[str]],
    mean: Callable[[tuple[str, ...]], float],
    *,
    per_cell: int = 6,
    noise: float = 0.4,
    places: int = 1,
) -> dict[tuple[str, ...], list[str]]:
    """Give readings of every combination that lie evenly about its mean, so that every estimate is known."""
    return {
        levels: [f"{mean(levels) + (noise if turn % 2 else -noise):.{places}f}" for turn in range(per_cell)]
        for levels in product(*crossed)
    }


def change_everything(place: Place) -> None:
    """Log 1,000 more trials, correct one, rename a level, and shut the maker out."""
    levels = [{"walk": walk, "start": start} for walk in WALK.levels for start in START.levels]
    for hundred in range(10):
        entries = [
            TrialEntry(key_of(1000 + 100 * hundred + at), levels[at % 6], {"minutes": f"{at % 40 + 5}.3"}, NOW)
            for at in range(100)
        ]
        log_trials(place.database, place.keeper, place.study_id, entries, now=NOW)
    correct_reading(
        place.database, place.keeper, place.study_id, 1, response="minutes", text="30.0", reason="misread", now=NOW
    )
    level = series_levels(place.database, place.keeper, place.series_id).factors[0].levels[0]
    rename_level(place.database, place.keeper, place.series_id, level.id, name="snake", reason="said so", now=NOW)
    with place.database.write() as session:
        session.execute(update(PersonRow).where(PersonRow.id == place.keeper.id).values(shut_out_at=NOW))
