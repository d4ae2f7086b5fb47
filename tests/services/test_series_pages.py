"""A series is started once under its name, and shows its studies in time and what the next one can take over."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta

import pytest
from sqlalchemy import event, select

from registry.errors import AlreadyThere, InputRefused, NotAllowed, NotFound
from registry.services.access import ROLES, Role
from registry.services.opening import Database
from registry.services.series_pages import SeriesDraft, home, new_series, series_detail
from registry.services.study_start import FactorDraft
from registry.services.trial_edit import set_aside_trial
from registry.services.trial_log import TrialEntry, log_trials
from registry.storage.tables import RegistryEvent
from tests.support.studies import (
    MINUTES,
    NOW,
    START,
    WALK,
    Place,
    a_keeper,
    a_study,
    another_study,
    close_a_study,
    even_readings,
    key_of,
)
from tests.support.visitors import somebody, somebody_in

BACK = {"walk": "return", "start": "back"}
READINGS = even_readings((WALK.levels, START.levels), lambda levels: 20.0 + len(levels[0]))


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def test_a_new_series_is_kept_as_typed_and_set_down_in_the_registrys_chain(database: Database) -> None:
    keeper = a_keeper(database)

    series_id = new_series(database, keeper, SeriesDraft("  Pick tours ", " How tours\r\nare walked "), now=NOW)

    line = series_detail(database, keeper, series_id).line
    assert (line.name, line.about, line.role, line.studies) == ("Pick tours", "How tours\nare walked", "keeper", ())
    with database.read() as session:
        newest = session.scalars(select(RegistryEvent).order_by(RegistryEvent.number.desc())).first()
        assert newest is not None
        assert (newest.what, newest.after, newest.person_id) == ("series_made", str(series_id), keeper.id)


def test_a_refused_series_names_every_fault_with_its_field_and_leaves_nothing(database: Database) -> None:
    keeper = a_keeper(database)

    with pytest.raises(InputRefused) as refusal:
        new_series(database, keeper, SeriesDraft("x" * 201, "y" * 4001), now=NOW)

    assert [(str(fault), fault.field) for fault in refusal.value.faults] == [
        ("name: 201 characters given; give at most 200", "name"),
        ("about: 4001 characters given; give at most 4000", "about"),
    ]
    assert home(database, keeper).series == ()


@pytest.mark.parametrize(
    ("name", "said"),
    [
        (" \t", "name: nothing given; give a name of 1 to 200 characters"),
        ("Pick\ntours", r"name: 'Pick\\ntours' holds a control character; give plain text on one line"),
        ("Pick \N{RIGHT-TO-LEFT OVERRIDE}tours", "holds a control character"),
    ],
)
def test_a_name_that_cannot_be_shown_is_refused(sqlite: Database, name: str, said: str) -> None:
    with pytest.raises(InputRefused, match=said):
        new_series(sqlite, a_keeper(sqlite), SeriesDraft(name, ""), now=NOW)


def test_blanks_around_a_name_make_no_other_series_of_it(place: Place) -> None:
    with pytest.raises(
        AlreadyThere, match="name: there is a series 'Pick tours' already; add a study to it, or choose"
    ):
        new_series(place.database, place.keeper, SeriesDraft(" Pick tours  ", ""), now=NOW)

    assert [line.name for line in home(place.database, place.keeper).series] == ["Pick tours"]


def test_the_keeper_of_a_series_is_no_keeper_of_the_registry(place: Place) -> None:
    member = somebody_in(place.database, place.keeper, place.series_id, role="keeper", address="sam@example.org")

    shown = home(place.database, member)

    assert ([line.role for line in shown.series], shown.may_start_series) == (["keeper"], False)
    assert home(place.database, place.keeper).may_start_series
    # The right to start one is asked before what was typed: this name would be refused too.
    with pytest.raises(
        NotAllowed, match="^series: only a keeper of the registry may start one; ask a keeper of the registry$"
    ):
        new_series(place.database, member, SeriesDraft("", ""), now=NOW)


@pytest.mark.parametrize("role", ROLES)
def test_a_role_covers_those_before_it_and_none_after_it(place: Place, role: Role) -> None:
    member = somebody_in(place.database, place.keeper, place.series_id, role=role, address="sam@example.org")

    (line,) = home(place.database, member).series

    assert [line.may(needed) for needed in ROLES] == [ROLES.index(needed) <= ROLES.index(role) for needed in ROLES]


def test_home_lists_series_by_name_and_a_member_only_those_with_a_role(place: Place) -> None:
    pack = new_series(place.database, place.keeper, SeriesDraft("Pack lines", ""), now=NOW)
    dock = new_series(place.database, place.keeper, SeriesDraft("Dock doors", ""), now=NOW)
    another_study(place.database, place.keeper, pack, title="Packing")
    member = somebody_in(place.database, place.keeper, pack, role="analyst")

    everything, own = home(place.database, place.keeper).series, home(place.database, member).series

    assert [(line.name, [study.title for study in line.studies]) for line in everything] == [
        ("Dock doors", []),
        ("Pack lines", ["Packing"]),
        ("Pick tours", ["Walk and start"]),
    ]
    assert [(line.id, line.role) for line in own] == [(pack, "analyst")]
    assert dock not in {line.id for line in own}


def test_a_running_study_tells_its_trials_and_when_the_last_one_happened(place: Place) -> None:
    # Logged in another order than they happened in.
    for key, days in enumerate((2, 5, 3), start=1):
        entry = TrialEntry(key_of(key), BACK, {"minutes": "7.1"}, NOW - timedelta(days=days))
        log_trials(place.database, place.keeper, place.study_id, [entry], now=NOW)
    set_aside_trial(place.database, place.keeper, place.study_id, 2, reason="aisle blocked", now=NOW)

    (study,) = home(place.database, place.keeper).series[0].studies

    assert (study.status, study.planned, study.logged, study.set_aside) == ("running", None, 3, 1)
    assert study.last_trial == NOW - timedelta(days=2)
    assert (study.closed_at, study.close_reason, study.headline) == (None, None, None)


def test_studies_stand_in_order_of_time_and_a_planned_one_last(place: Place) -> None:
    another_study(place.database, place.keeper, place.series_id, title="Next year", started=False)
    earlier = NOW - timedelta(days=90)
    close_a_study(place, title="Last winter", readings=READINGS, starts=earlier)

    studies = home(place.database, place.keeper).series[0].studies

    assert [study.title for study in studies] == ["Last winter", "Walk and start", "Next year"]
    closed, running, planned = studies
    # Six combinations of six trials were planned and logged; the study closed a day after it started.
    assert (closed.planned, closed.logged, closed.close_reason) == (36, 36, "size_reached")
    assert closed.closed_at == earlier + timedelta(days=1)
    assert closed.headline
    assert (running.headline, planned.headline, planned.last_trial) == (None, None, None)


def test_the_next_study_is_offered_every_level_and_the_latest_step_unit_and_margin(place: Place) -> None:
    walk = FactorDraft("walk", "treatment", ("return", "zigzag"))
    seconds = replace(MINUTES, unit="s", step="5", margin="")
    another_study(place.database, place.keeper, place.series_id, title="Two", factors=(walk,), responses=(seconds,))

    detail = series_detail(place.database, place.keeper, place.series_id)

    assert [(factor.name, factor.levels) for factor in detail.factors] == [
        ("walk", ("serpentine", "largest gap", "return", "zigzag")),
        ("start", ("front", "back")),
    ]
    (response,) = detail.responses
    assert (response.name, response.unit, response.step, response.margin) == ("minutes", "s", "5", None)
    assert (response.wanted, response.kind, response.part) == ("lower", "measured", "primary")


def test_sites_are_offered_once_each_the_latest_first(place: Place) -> None:
    for days, site in ((30, "Mosevang"), (20, "Osierholm"), (10, "Birkeby"), (5, "Mosevang")):
        close_a_study(place, title=f"{days} days ago", readings=READINGS, starts=NOW - timedelta(days=days), site=site)

    # The study of the fixture is the newest of all, at Osierholm.
    assert series_detail(place.database, place.keeper, place.series_id).sites == ("Osierholm", "Mosevang", "Birkeby")


def test_a_stranger_cannot_tell_a_series_from_none_and_a_viewer_sees_it(place: Place) -> None:
    stranger = somebody(place.database, "stranger@example.org")
    viewer = somebody_in(place.database, place.keeper, place.series_id, role="viewer")

    for series_id in (place.series_id, place.series_id + 99):
        with pytest.raises(
            NotFound, match=f"^series: there is no series {series_id} for you; choose one from Studies$"
        ):
            series_detail(place.database, stranger, series_id)
    assert series_detail(place.database, viewer, place.series_id).line.role == "viewer"


def test_home_asks_as_many_queries_for_many_studies_as_for_one(place: Place) -> None:
    asked: list[str] = []

    def listen(_connection: object, _cursor: object, statement: str, *_more: object) -> None:
        asked.append(statement)

    def queries() -> int:
        asked.clear()
        home(place.database, place.keeper)
        return len(asked)

    queries()  # The first connection of a process asks more.
    event.listen(place.database.engine, "before_cursor_execute", listen)
    one = queries()
    for turn in range(3):
        series_id = new_series(place.database, place.keeper, SeriesDraft(f"Series {turn}", ""), now=NOW)
        another_study(place.database, place.keeper, series_id, title="One")
        another_study(place.database, place.keeper, series_id, title="Two")
    many = queries()
    event.remove(place.database.engine, "before_cursor_execute", listen)

    assert 0 < one == many
