"""Building the demo through the services, as people would: plan, start, log, set aside, close."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime, time, timedelta
from io import StringIO
from random import Random
from uuid import UUID

from registry.services.access import Role
from registry.services.decisions import DecisionDraft, decide, say_whether_it_held
from registry.services.import_check import ColumnChoice
from registry.services.levels import rename_level, series_levels
from registry.services.opening import Database
from registry.services.people import Person, add_person, grant
from registry.services.run_order import run_list, skip_run
from registry.services.series_pages import SeriesDraft, new_series
from registry.services.settings import PasswordCost
from registry.services.study_plan import PlanDraft, close_study, lock_plan, start_study
from registry.services.study_start import FactorDraft, ResponseDraft, StudyDraft, new_study
from registry.services.trial_edit import set_aside_trial
from registry.services.trial_import import read_upload, run_import
from registry.services.trial_log import MOST_AT_ONCE, TrialEntry, log_trials
from seed_demo.scenario import MARGIN, RENAMED, SHIFT, STUDIES, Decided, Levels, PlannedStudy

SEED = 20241016
ZONE = "Europe/Copenhagen"
TOURS_A_DAY = 24
STEP = {"min": "0.1", "s": "1"}


@dataclass(frozen=True)
class DemoPeople:
    """Who can sign in to the demo, and with what."""

    keeper: Person
    analyst: Person
    logger: Person
    password: str


@dataclass(frozen=True)
class Tour:
    """One simulated pick tour."""

    levels: dict[str, str]
    reading: str
    wrong_pick: str
    happened_at: datetime
    run: int | None = None


def build_demo(
    database: Database, *, now: datetime, password: str, hashing: PasswordCost, seed: int = SEED
) -> DemoPeople:
    """Fill an empty registry with the invented depot; the same seed gives the same trials."""
    people = _add_people(database, now=now, password=password, hashing=hashing)
    series_id = new_series(
        database,
        people.keeper,
        SeriesDraft(
            "Pick tours at Osierholm",
            "How pickers walk their tours at the Osierholm Parts Depot, in both of its halls.",
        ),
        now=_morning(STUDIES[0], days=-10),
    )
    roles: tuple[tuple[Person, Role], ...] = ((people.analyst, "analyst"), (people.logger, "logger"))
    for person, role in roles:
        grant(database, people.keeper, series_id, address=person.address, role=role, now=_morning(STUDIES[0], days=-10))
    for place, planned in enumerate(STUDIES):
        _build_study(database, people, series_id, planned, rng=Random(f"{seed}/{place}"), now=now)
    return people


def _add_people(database: Database, *, now: datetime, password: str, hashing: PasswordCost) -> DemoPeople:
    start = min(now, _morning(STUDIES[0], days=-12))
    keeper, analyst, logger = (
        add_person(
            database,
            name=name,
            address=f"{part}@osierholm.example",
            password=password,
            keeper=part == "keeper",
            now=start,
            hashing=hashing,
        )
        for name, part in (("Runa Keel", "keeper"), ("Ane Tangen", "analyst"), ("Jo Birk", "logger"))
    )
    return DemoPeople(keeper, analyst, logger, password)


def _morning(planned: PlannedStudy, *, days: int = 0) -> datetime:
    return datetime.combine(planned.starts, time(7, 0), UTC) + timedelta(days=days)


def _build_study(
    database: Database, people: DemoPeople, series_id: int, planned: PlannedStudy, *, rng: Random, now: datetime
) -> None:
    made_at = min(_morning(planned, days=-7), now)
    if planned.renames:
        _rename(database, people, series_id, now=made_at)
    study_id = new_study(database, people.analyst, series_id, _draft(planned), now=made_at)
    if planned.status == "planned":
        return
    draft = PlanDraft(str(planned.per_cell), spread=planned.spread)
    # What the shift leads kept in a file was run as it came; every other study has its run order.
    seed = None if planned.imported else rng.randrange(2**31)
    lock_plan(database, people.analyst, study_id, draft, now=made_at, seed=seed)
    start_study(database, people.analyst, study_id, now=_morning(planned))
    if planned.imported:
        tours = list(tours_of(planned, rng))
        _import(database, people, study_id, planned, tours)
    else:
        tours = _run_in_order(database, people, study_id, planned, rng)
    last = tours[-1].happened_at
    for number, reason in planned.set_aside.items():
        set_aside_trial(database, people.analyst, study_id, number, reason=reason, now=last)
    if planned.status == "closed":
        if planned.close_reason == "size_reached" and planned.set_aside:
            _make_up(database, people, study_id, planned, tours, rng)
        close_study(
            database,
            people.analyst,
            study_id,
            reason=planned.close_reason,
            note=planned.close_note,
            now=last + timedelta(days=1),
        )
        if planned.decision:
            _decide(database, people, study_id, planned.decision, now=last + timedelta(days=3))


def _decide(database: Database, people: DemoPeople, study_id: int, decided: Decided, *, now: datetime) -> None:
    """Set down what the depot decided, and later whether it held."""
    draft = DecisionDraft(decided.what, decided.from_day, decided.saving, decided.saving_unit, decided.review_day)
    number = decide(database, people.analyst, study_id, draft, now=now)
    if decided.held:
        say_whether_it_held(
            database, people.analyst, study_id, number, held=decided.held, note=decided.held_note,
            now=datetime.combine(date.fromisoformat(decided.review_day), time(9, 0), UTC),
        )  # fmt: skip


def _run_in_order(
    database: Database, people: DemoPeople, study_id: int, planned: PlannedStudy, rng: Random
) -> list[Tour]:
    """Work through the run order as far as the study got; skip what could not be run, saying why."""
    runs = run_list(database, people.logger, study_id)
    runs = runs[: round(len(runs) * planned.share)]
    tours: list[Tour] = []
    for run in runs:
        reason = planned.skipped_runs.get(run.position, planned.why_never if _never_run(planned, run.levels) else "")
        if reason:
            day = _morning(planned, days=len(tours) // TOURS_A_DAY)
            skip_run(database, people.logger, study_id, run.position, reason=reason, now=day)
            continue
        tours.append(replace(_tour(planned, dict(run.levels), len(tours), rng), run=run.position))
    beyond = [cell for cell in planned.cells for _ in range(_more(planned, cell))]
    tours += [_tour(planned, cell, len(tours) + place, rng) for place, cell in enumerate(beyond)]
    _log(database, people, study_id, planned, tours, rng)
    return tours


def _rename(database: Database, people: DemoPeople, series_id: int, *, now: datetime) -> None:
    """Call the return walk what the crews call it by now."""
    before, after = RENAMED
    walk = next(
        factor for factor in series_levels(database, people.analyst, series_id).factors if factor.name == "walk"
    )
    level = next(level for level in walk.levels if level.name == before)
    rename_level(
        database, people.analyst, series_id, level.id, name=after, reason="that is what the crews call it", now=now
    )


def _draft(planned: PlannedStudy) -> StudyDraft:
    factors = [FactorDraft(name, "treatment", levels) for name, levels in planned.factors.items()]
    if planned.block:
        factors.append(FactorDraft("shift", "block", SHIFT))
    factors += [FactorDraft(name, "held", (level,)) for name, level in planned.held.items()]
    responses = [
        ResponseDraft("tour time", "time per tour, from the first scan to the drop", planned.unit,
                      STEP[planned.unit], MARGIN[planned.unit], "lower", "measured", "primary")
    ]  # fmt: skip
    if planned.guard:
        responses.append(
            ResponseDraft(
                "wrong pick", "whether the tour had a wrong pick", "count", "1", "", "lower", "yes_no", "guard"
            )
        )
    return StudyDraft(planned.title, planned.question, planned.site, ZONE, tuple(factors), tuple(responses))


def tours_of(planned: PlannedStudy, rng: Random) -> Iterator[Tour]:
    """Run the tours of a study in random order, a set of all combinations after another."""
    order: list[dict[str, str]] = []
    for complete_set in range(planned.per_cell):
        complete = [dict(cell) for cell in planned.cells if not _never_run(planned, cell)]
        complete += [cell for cell in complete if complete_set < _more(planned, cell)]
        rng.shuffle(complete)
        order += complete
    for place, levels in enumerate(order[: round(len(order) * planned.share)]):
        yield _tour(planned, levels, place, rng)


def _never_run(planned: PlannedStudy, cell: Levels) -> bool:
    return any(all(cell[name] == level for name, level in levels.items()) for levels in planned.never_run)


def _more(planned: PlannedStudy, cell: dict[str, str]) -> int:
    """Say how many more trials than planned a combination got."""
    return max((more for pair, more in planned.more.items() if set(pair) <= set(cell.values())), default=0)


def _tour(planned: PlannedStudy, levels: dict[str, str], place: int, rng: Random) -> Tour:
    minutes = simulated_minutes(planned, levels, rng)
    reading = f"{minutes:.1f}" if planned.unit == "min" else f"{60 * minutes:.0f}"
    day, turn = divmod(place, TOURS_A_DAY)
    happened = _morning(planned, days=day) + timedelta(minutes=10 + 20 * turn + rng.randrange(15))
    wrong = "yes" if rng.random() < planned.truth.wrong_pick else "no"
    return Tour(levels, reading, wrong, happened)


def simulated_minutes(planned: PlannedStudy, levels: Levels, rng: Random) -> float:
    """Draw the minutes of one tour: the truth and a noise of the site's spread."""
    return max(1.0, planned.true_mean(levels) + rng.gauss(0.0, planned.truth.sd))


def _log(
    database: Database, people: DemoPeople, study_id: int, planned: PlannedStudy, tours: Sequence[Tour], rng: Random
) -> None:
    """Log tours in the order they happened, a list at a time, as a phone sends them."""
    entries = [
        TrialEntry(
            key=str(UUID(int=rng.getrandbits(128), version=4)),
            levels=tour.levels,
            readings={"tour time": tour.reading} | ({"wrong pick": tour.wrong_pick} if planned.guard else {}),
            happened_at=tour.happened_at,
            run=tour.run,
        )
        for tour in tours
    ]
    for start in range(0, len(entries), MOST_AT_ONCE):
        some = entries[start : start + MOST_AT_ONCE]
        log_trials(database, people.logger, study_id, some, now=some[-1].happened_at or _morning(planned))


def _make_up(
    database: Database, people: DemoPeople, study_id: int, planned: PlannedStudy, tours: Sequence[Tour], rng: Random
) -> None:
    """Run again what was set aside, so that the planned size is reached."""
    again = [tours[number - 1].levels for number in planned.set_aside]
    made_up = [_tour(planned, levels, len(tours) + place, rng) for place, levels in enumerate(again)]
    _log(database, people, study_id, planned, made_up, rng)


def _import(
    database: Database, people: DemoPeople, study_id: int, planned: PlannedStudy, tours: Sequence[Tour]
) -> None:
    """Take a study in from the file that the shift leads kept."""
    names = list(tours[0].levels)
    text = StringIO()
    writer = csv.writer(text)
    writer.writerow([*names, "tour time", "when"])
    for tour in tours:
        writer.writerow([*tour.levels.values(), tour.reading, tour.happened_at.isoformat()])
    last = tours[-1].happened_at
    job = read_upload(
        database, people.analyst, study_id, name="spring tours.csv", content=text.getvalue().encode(), now=last
    )
    choices = [*(ColumnChoice("factor", name) for name in names), ColumnChoice("response", "tour time"),
               ColumnChoice("happened_at")]  # fmt: skip
    run_import(database, people.analyst, study_id, job, choices=choices, round_offered=False, now=last)
