"""Two studies of a series beside each other, in words and numbers."""

from __future__ import annotations

from datetime import timedelta

import pytest

from registry.errors import NotFound, NotNow
from registry.services.comparison import Comparison, compare_studies
from registry.services.levels import change_meaning, rename_level, series_levels
from registry.services.opening import Database
from registry.services.study_start import FactorDraft, ResponseDraft
from tests.support.studies import NOW, START, WALK, Place, a_study, close_a_study, even_readings
from tests.support.visitors import a_visitor, an_app

SECONDS = ResponseDraft("minutes", "minutes per tour", "s", "1", "48", "lower", "measured", "primary")
BATCH = FactorDraft("batch", "treatment", ("4", "8", "12"))
EFFECT = {
    "serpentine": 1.0,
    "largest gap": -1.0,
    "return": 0.5,
    "front": 0.0,
    "back": 0.4,
    "4": -3.0,
    "8": 0.0,
    "12": 3.0,
}
LATER = NOW + timedelta(days=90)


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def mean(levels: tuple[str, ...]) -> float:
    return 20 + sum(EFFECT.get(level, 0.0) for level in levels)


def crossed(*factors: FactorDraft) -> dict[tuple[str, ...], list[str]]:
    return even_readings([factor.levels for factor in factors], mean, noise=0.2)


def compared(place: Place, study_id: int, beside: int | None = None) -> Comparison:
    return compare_studies(place.database, place.keeper, study_id, beside=beside)


def winter(place: Place, **more: object) -> int:
    return close_a_study(place, title="Winter", readings=crossed(WALK, START), **more)  # type: ignore[arg-type]


def test_a_study_is_set_beside_the_one_before_and_the_same_season_last_year_is_offered(place: Place) -> None:
    year = timedelta(days=364)
    last_year = close_a_study(place, title="Winter last year", readings=crossed(WALK, START), starts=NOW - year)
    before = close_a_study(place, title="Autumn", readings=crossed(WALK, START), starts=NOW - timedelta(days=90))
    this = winter(place)

    found = compared(place, this)

    assert (found.first.title, found.second.title) == ("Autumn", "Winter")
    assert found.before is not None
    assert found.season is not None
    assert (found.before.id, found.season.id) == (before, last_year)
    assert found.sentences == ("No contrast is shown to have changed.", "7 contrasts show no change that matters.")
    assert (found.apart, found.caveats, found.renamed) == ((), (), ())


def test_the_study_before_at_the_same_site_comes_first(place: Place) -> None:
    here = close_a_study(place, title="Here", readings=crossed(WALK, START), starts=NOW - timedelta(days=120))
    close_a_study(place, title="There", readings=crossed(WALK, START), starts=NOW - timedelta(days=60), site="Annex")

    assert compared(place, winter(place)).first.id == here


def test_what_changed_is_said_with_both_numbers_and_the_interval(place: Place) -> None:
    first = winter(place)

    def slower(levels: tuple[str, ...]) -> float:
        return mean(levels) + (3.0 if levels[0] == "return" else 0.0)

    readings = even_readings((WALK.levels, START.levels), slower)
    second = close_a_study(place, title="Spring", readings=readings, starts=LATER)

    found = compared(place, second, beside=first)

    assert found.sentences[0].startswith(
        "walk: return \N{MINUS SIGN} serpentine: \N{MINUS SIGN}0.50 min then, 2.50 min now; changed by 3.00 min ("
    )
    changed = [line for line in found.differences if line.code == "changed"]
    assert [line.name for line in changed] == [
        "walk: return \N{MINUS SIGN} serpentine",
        "walk: return \N{MINUS SIGN} largest gap",
    ]
    assert {line.words for line in changed} == {"changed"}


def test_seconds_are_told_in_the_minutes_of_the_study_that_asks(place: Place) -> None:
    first = close_a_study(
        place, title="Seconds", responses=(SECONDS,),
        readings=even_readings((WALK.levels, START.levels), lambda levels: 60 * mean(levels), noise=12, places=0),
    )  # fmt: skip
    second = close_a_study(place, title="Minutes", readings=crossed(WALK, START), starts=LATER)

    found = compared(place, second, beside=first)

    assert (found.unit, found.margin) == ("min", "0.8")
    for line in (*found.differences, *found.interactions):
        assert line.first.value.value == pytest.approx(line.second.value.value)
        assert line.first.se.value == pytest.approx(line.second.se.value)
    # Asked from the other side it is told in seconds, and the later study's margin still holds.
    assert compared(place, first, beside=second).unit == "min"


def test_a_factor_held_in_one_study_is_compared_in_the_slice_they_share(place: Place) -> None:
    first = close_a_study(place, title="Held", factors=(WALK, FactorDraft("batch", "held", ("8",))),
                          readings=crossed(WALK))  # fmt: skip
    second = close_a_study(place, title="Varied", factors=(WALK, BATCH), readings=crossed(WALK, BATCH), starts=LATER)

    found = compared(place, second, beside=first)

    assert found.apart == ("batch: held at 8 in Held, crossed over 4, 8 and 12 in Varied; all else is read at 8.",)
    assert found.caveats == ("batch is averaged over 8 alone, the levels that all of these studies have.",)
    assert all(line.first.value.value == pytest.approx(line.second.value.value) for line in found.differences)


def test_a_renamed_level_is_the_same_level_and_the_page_says_so(place: Place) -> None:
    first = winter(place)
    level = next(
        level
        for level in series_levels(place.database, place.keeper, place.series_id).factors[0].levels
        if level.name == "return"
    )
    rename_level(
        place.database, place.keeper, place.series_id, level.id, name="there and back", reason="crews say so", now=NOW
    )
    factors = (FactorDraft("walk", "treatment", ("serpentine", "largest gap", "there and back")), START)
    readings = even_readings(
        [factor.levels for factor in factors],
        lambda levels: mean(tuple("return" if level == "there and back" else level for level in levels)),
    )
    second = close_a_study(place, title="Spring", factors=factors, readings=readings, starts=LATER)

    found = compared(place, second, beside=first)

    assert found.renamed == ("there and back has also been called return; it is the same level.",)
    assert found.apart == ()
    assert len(found.differences) == 4


def test_a_level_whose_meaning_changed_is_another_level_and_the_page_says_so(place: Place) -> None:
    first = winter(place)
    level = next(
        level
        for level in series_levels(place.database, place.keeper, place.series_id).factors[0].levels
        if level.name == "return"
    )
    change_meaning(
        place.database, place.keeper, place.series_id, level.id,
        name="return by the lift", definition="back along the new lift", now=NOW,
    )  # fmt: skip
    factors = (FactorDraft("walk", "treatment", ("serpentine", "largest gap", "return by the lift")), START)
    second = close_a_study(place, title="Spring", factors=factors, readings=crossed(*factors), starts=LATER)

    found = compared(place, second, beside=first)

    (words,) = found.apart
    assert words == (
        "walk: return only in Winter; return by the lift only in Spring. return by the lift took the place of return"
        " when its meaning changed, so they are two levels and not compared as one."
    )
    assert [line.name for line in found.differences if line.name.startswith("walk")] == [
        "walk: largest gap \N{MINUS SIGN} serpentine"
    ]


def test_one_shared_level_alone_is_refused_with_its_reason(place: Place) -> None:
    one = FactorDraft("walk", "treatment", ("serpentine", "return"))
    other = FactorDraft("walk", "treatment", ("return", "largest gap"))
    first = close_a_study(place, title="One", factors=(one, START), readings=crossed(one, START))
    second = close_a_study(place, title="Other", factors=(other, START), readings=crossed(other, START), starts=LATER)

    found = compared(place, second, beside=first)

    assert found.apart == (
        "walk: the two studies share only return, and a difference needs two levels; all else is read at return.",
    )


def test_a_factor_only_one_study_has_is_named_with_a_warning(place: Place) -> None:
    first = close_a_study(place, title="Walk alone", factors=(WALK,), readings=crossed(WALK))
    second = winter(place, starts=LATER)

    found = compared(place, second, beside=first)

    assert found.apart == ("start: only Winter has it; there all else is averaged over front and back.",)
    assert found.caveats == ("start is not set down in Walk alone, so what it was there may move the difference.",)


def test_a_study_closed_early_shows_its_numbers_and_judges_nothing(place: Place) -> None:
    first = winter(place, reason="early")
    second = close_a_study(place, title="Spring", readings=crossed(WALK, START), starts=LATER)

    found = compared(place, second, beside=first)

    assert {line.code for line in found.differences} == {None}
    assert found.differences[0].change.value.value is not None
    assert found.differences[0].change.lower.value is None
    assert found.sentences[-1] == "7 of 7 contrasts cannot be judged; the table says why."


def test_only_closed_studies_of_the_series_are_compared(place: Place) -> None:
    with pytest.raises(NotNow, match="Walk and start: it is running; only closed studies are compared"):
        compared(place, place.study_id)
    this = winter(place)
    with pytest.raises(NotNow, match="Winter: no other closed study of its series read this response"):
        compared(place, this)
    close_a_study(place, title="Spring", readings=crossed(WALK, START), starts=LATER)
    with pytest.raises(NotFound, match="there is no closed study 999 in this series that read minutes"):
        compared(place, this, beside=999)
    with pytest.raises(NotFound, match="'weight' is not measured in a closed study of this series; choose minutes"):
        compare_studies(place.database, place.keeper, this, response="weight")


def test_what_is_no_study_is_not_taken_for_the_one_before(place: Place) -> None:
    this = winter(place)
    close_a_study(place, title="Autumn", readings=crossed(WALK, START), starts=NOW - timedelta(days=90))
    visitor = a_visitor(an_app(place.database), place.keeper.address)

    assert visitor.get(f"/studies/{this}/compare?with=abc").status_code == 404
    assert visitor.get(f"/studies/{this}/compare").status_code == 200


def test_the_record_says_what_the_page_says(place: Place) -> None:
    first = winter(place)
    second = close_a_study(place, title="Spring", readings=crossed(WALK, START), starts=LATER)

    found = compared(place, second, beside=first)

    assert found.record["format"] == "weftbook.comparison/1"
    assert [study["title"] for study in found.record["studies"]] == ["Winter", "Spring"]
    assert [each["name"] for each in found.record["differences"]] == [line.name for line in found.differences]
    assert found.record["differences"][0]["change"]["lower"] == found.differences[0].change.lower.value
