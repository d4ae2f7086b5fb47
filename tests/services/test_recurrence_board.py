"""The recurrence board of a series, over studies in the database."""

from __future__ import annotations

from datetime import timedelta

import pytest
from sqlalchemy import event

from registry.errors import NotFound
from registry.services.opening import Database
from registry.services.recurrence_board import RecurrenceBoard, recurrence_board
from registry.services.study_start import FactorDraft, ResponseDraft
from tests.support.studies import NOW, START, WALK, Place, a_study, close_a_study, even_readings

TWO = FactorDraft("walk", "treatment", ("serpentine", "return"))
NO_MARGIN = ResponseDraft("minutes", "minutes per tour", "min", "0.1", "", "lower", "measured", "primary")


@pytest.fixture
def place(database: Database) -> Place:
    return a_study(database)


def closed(place: Place, title: str, effect: float, *, quarter: int, noise: float = 0.4, **more: object) -> int:
    """Close a 2 × 2 study whose interaction contrast is exactly ``effect``."""
    return close_a_study(
        place,
        title=title,
        factors=(TWO, START),
        readings=even_readings(
            (TWO.levels, START.levels),
            lambda levels: 20.0 + (effect if levels == ("return", "back") else 0.0),
            per_cell=8,
            noise=noise,
        ),
        starts=NOW + quarter * timedelta(days=90),
        **more,  # type: ignore[arg-type]
    )


def board_of(place: Place) -> RecurrenceBoard:
    return recurrence_board(place.database, place.keeper, place.series_id)


def test_an_interaction_seen_in_three_studies_is_seen_again(place: Place) -> None:
    for quarter, effect in enumerate((2.0, 2.2, 1.9)):
        closed(place, f"Quarter {quarter}", effect, quarter=quarter)

    found = board_of(place)

    (line,) = found.lines
    assert line.name == ("walk × start: (return \N{MINUS SIGN} serpentine) at back less at front")
    assert (line.code, line.words) == ("seen_again", "seen again")
    assert line.sentence == (
        "At least 3 of 3 studies show it, in the same direction. Every estimate has the same sign."
    )
    assert [mark.place for mark in line.marks] == [1, 2, 3]
    assert found.sentences[0] == "Of 1 interaction contrasts over 3 closed studies: 1 seen again."
    assert found.waiting == 1
    assert found.record["interactions"][0]["verdict"] == "seen_again"


def test_what_is_not_settled_says_how_large_a_study_would_settle_it(place: Place) -> None:
    closed(place, "One", 0.9, quarter=0, noise=3.0)
    closed(place, "Two", -0.5, quarter=1, noise=3.0)

    (line,) = board_of(place).lines

    assert line.code == "unsettled"
    assert "One more study like the last of them, with about " in line.sentence
    assert "would bring its own interval within 0.4 min either way." in line.sentence
    assert line.next_step == "plan for precision"


def test_a_study_closed_early_is_marked_and_counts_for_nothing(place: Place) -> None:
    closed(place, "Full", 2.0, quarter=0)
    closed(place, "Early", 2.0, quarter=1, reason="early", planned=20)

    found = board_of(place)

    (line,) = found.lines
    assert [mark.judged for mark in line.marks] == [True, False]
    assert line.marks[1].why_not.startswith("closed before its size")
    assert [head.standing for head in found.studies] == ["full", "early"]


def test_a_board_without_a_closed_study_or_a_margin_says_why_it_is_empty(place: Place) -> None:
    assert board_of(place).why_empty == "No study of this series has closed yet."
    close_a_study(
        place,
        title="No margin",
        responses=(NO_MARGIN,),
        readings=even_readings((WALK.levels, START.levels), lambda _: 20.0),
    )

    assert board_of(place).why_empty == (
        "No closed study stated a margin that matters for minutes, and a verdict needs one."
    )


def test_a_response_no_closed_study_measured_is_refused(place: Place) -> None:
    closed(place, "One", 1.0, quarter=0)
    with pytest.raises(NotFound, match="'weight' is not measured in a closed study of this series; choose minutes"):
        recurrence_board(place.database, place.keeper, place.series_id, response="weight")


def test_the_number_of_queries_does_not_grow_with_the_studies(place: Place) -> None:
    counts = []
    for quarter in range(3):
        closed(place, f"Quarter {quarter}", 1.0, quarter=quarter)
        asked: list[str] = []

        def listen(_connection: object, _cursor: object, statement: str, *_more: object) -> None:
            asked.append(statement)  # noqa: B023 - read before the next round.

        event.listen(place.database.engine, "before_cursor_execute", listen)
        board_of(place)
        event.remove(place.database.engine, "before_cursor_execute", listen)
        counts.append(len(asked))

    assert counts[0] == counts[1] == counts[2]
