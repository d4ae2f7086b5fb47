"""Levels through time: renamed, or turned into another when their meaning changes."""

from __future__ import annotations

import pytest

from registry.errors import AlreadyThere, InputRefused, NotAllowed, NotFound
from registry.services.history import study_history
from registry.services.levels import LevelLine, change_meaning, rename_level, series_levels
from registry.services.opening import Database
from registry.services.upkeep import recount
from tests.support.studies import NOW, Place, a_study, another_study
from tests.support.visitors import somebody_in


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def level(place: Place, name: str) -> LevelLine:
    walk = series_levels(place.database, place.keeper, place.series_id).factors[0]
    return next(each for each in walk.levels if each.name == name)


def rename(place: Place, old: str, new: str, reason: str = "crews say so") -> None:
    rename_level(place.database, place.keeper, place.series_id, level(place, old).id, name=new, reason=reason, now=NOW)


def test_a_renamed_level_keeps_its_identity_and_its_old_name_still_finds_it(place: Place) -> None:
    before = level(place, "return").id

    rename(place, "return", "there and back")

    found = level(place, "there and back")
    assert (found.id, found.aliases, found.studies) == (before, ("return",), 1)
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    another_study(place.database, place.keeper, place.series_id, title="Next")  # Made with the old name.
    assert level(place, "there and back").studies == 2


def test_every_study_that_uses_the_level_has_the_renaming_in_its_history(place: Place) -> None:
    other = another_study(place.database, place.keeper, place.series_id, title="Other")

    rename(place, "return", "there and back")

    for study in (place.study_id, other):
        newest = study_history(place.database, place.keeper, study).events[0]
        assert newest.words == "walk: return is called there and back from now on"
        assert newest.reason == "crews say so"
    assert recount(place.database).faults == ()


def test_a_name_taken_back_stops_being_an_alias(place: Place) -> None:
    rename(place, "return", "there and back")
    rename(place, "there and back", "return", reason="nobody did say so")

    assert level(place, "return").aliases == ("there and back",)


@pytest.mark.parametrize("name", ["serpentine", "Serpentine", "return"])
def test_a_name_that_another_level_has_or_the_level_has_already_is_refused(place: Place, name: str) -> None:
    with pytest.raises(AlreadyThere, match=f"factor walk, name: '{name}' given, but .* goes? by it|has gone by it"):
        rename(place, "return", name)


def test_a_name_another_level_has_gone_by_is_refused(place: Place) -> None:
    rename(place, "return", "there and back")

    with pytest.raises(AlreadyThere, match="'return' given, but 'there and back' has gone by it"):
        rename(place, "serpentine", "return")


def test_a_renaming_needs_a_name_and_a_reason(place: Place) -> None:
    with pytest.raises(InputRefused, match="new name: nothing given") as refusal:
        rename(place, "return", " ", reason=" ")
    assert [fault.field for fault in refusal.value.faults] == ["name", "reason"]


def test_a_changed_meaning_is_a_new_level_that_tells_whose_place_it_took(place: Place) -> None:
    change_meaning(
        place.database, place.keeper, place.series_id, level(place, "return").id,
        name="return by the lift", definition="back along the new lift", now=NOW,
    )  # fmt: skip

    found = level(place, "return by the lift")
    assert (found.replaces, found.definition, found.studies) == ("return", "back along the new lift", 0)
    assert level(place, "return").studies == 1
    assert recount(place.database).faults == ()


def test_a_changed_meaning_needs_a_name_of_its_own_and_a_definition(place: Place) -> None:
    with pytest.raises(InputRefused, match="what it means now: nothing given; say it in a few words"):
        change_meaning(
            place.database, place.keeper, place.series_id, level(place, "return").id, name="new", definition="", now=NOW
        )
    with pytest.raises(AlreadyThere, match="'return' given, but 'return' goes by it"):
        change_meaning(
            place.database, place.keeper, place.series_id, level(place, "return").id,
            name="return", definition="other", now=NOW,
        )  # fmt: skip


def test_a_level_of_another_series_and_a_role_too_small_are_refused(place: Place) -> None:
    with pytest.raises(NotFound, match="level: this series has no level 999; choose one from its levels"):
        rename_level(place.database, place.keeper, place.series_id, 999, name="x", reason="y", now=NOW)
    logger = somebody_in(place.database, place.keeper, place.series_id, role="logger")
    with pytest.raises(NotAllowed, match="a logger may log trials"):
        rename_level(place.database, logger, place.series_id, level(place, "return").id, name="x", reason="y", now=NOW)
