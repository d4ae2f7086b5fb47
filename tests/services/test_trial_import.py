"""A file is looked at before anything is written, and taken in whole or not at all."""

from __future__ import annotations

from collections.abc import Sequence

import pytest

from registry.errors import AlreadyThere, InputRefused, NotFound, NotNow
from registry.services.history import study_history
from registry.services.import_check import ColumnChoice
from registry.services.opening import Database
from registry.services.trial_import import Preview, drop_upload, preview, read_upload, run_import
from registry.services.trial_pages import trial_detail, trial_list
from registry.services.upkeep import recount
from tests.support.studies import MINUTES, NOW, SHIFT, START, WALK, WRONG_PICK, FactorDraft, Place, a_study

GOOD = "walk,start,minutes\nreturn,back,7.1\nreturn,front,6.9\nserpentine,back,7.7\n"


def give(place: Place, text: str | bytes, name: str = "tours.csv") -> int:
    content = text if isinstance(text, bytes) else text.encode()
    return read_upload(place.database, place.keeper, place.study_id, name=name, content=content, now=NOW)


def look(place: Place, job: int, choices: Sequence[ColumnChoice] | None = None) -> Preview:
    return preview(place.database, place.keeper, place.study_id, job, choices=choices, now=NOW)


def take(place: Place, job: int, *, round_offered: bool = False, again: bool = False) -> tuple[int, int, int]:
    seen = look(place, job)
    done = run_import(
        place.database, place.keeper, place.study_id, job,
        choices=seen.choices, round_offered=round_offered, again=again, now=NOW,
    )  # fmt: skip
    return done.rows, done.first, done.last


def test_a_clean_file_is_guessed_previewed_and_taken_in(database: Database) -> None:
    place = a_study(database)
    job = give(place, GOOD)

    seen = look(place, job)

    assert seen.ready
    assert seen.choices == (
        ColumnChoice("factor", "walk"),
        ColumnChoice("factor", "start"),
        ColumnChoice("response", "minutes"),
    )
    assert seen.sample[0] == ("return", "back", "7.1")
    assert trial_list(database, place.keeper, place.study_id).total == 0
    assert take(place, job) == (3, 1, 3)
    assert recount(database).faults == ()
    (newest, *_) = study_history(database, place.keeper, place.study_id).events
    assert newest.what == "trials_imported"


def test_every_fault_is_named_by_line_and_column_and_nothing_is_written(database: Database) -> None:
    place = a_study(
        database, factors=(WALK, START, FactorDraft("batch", "held", ("8",))), responses=(MINUTES, WRONG_PICK)
    )
    job = give(
        place,
        'Walk,start,batch,minutes,wrong pick,when,note\n'
        'return,back,8,7.1,no,2026-03-01 08:00,fine\n'
        'zigzag,back,8,7.1,no,,\n'
        'return,,8,"7,1",perhaps,1 March,\n'
        '"return",back,4,1e400,no,2027-01-01,\n',
    )  # fmt: skip

    seen = look(place, job)

    assert not seen.ready
    texts = [str(fault) for fault in seen.faults]
    assert texts[0] == "line 3, column Walk: 'zigzag' given; choose one of serpentine, largest gap, return"
    assert texts[1].startswith("line 4, column minutes: '7,1'")
    assert texts[2] == "line 4, column wrong pick: 'perhaps' given; give yes or no"
    assert texts[3] == "line 4, column start: no level given; choose one of front, back"
    assert texts[4] == "line 4, column when: '1 March' given; write the time as 2026-03-02 14:05"
    assert texts[5].startswith("line 5, column minutes: '1e400'")
    assert texts[6] == "line 5, column batch: '4' given; this study holds batch at 8"
    assert texts[7].startswith("line 5, column when, time: 2027-01-01 00:00 has not come yet")
    assert seen.fault_count == len(texts) == 8
    with pytest.raises(InputRefused, match="line 3, column Walk"):
        take(place, job)
    assert trial_list(database, place.keeper, place.study_id).total == 0


def test_readings_between_two_steps_are_offered_rounded_once_for_the_whole_file(database: Database) -> None:
    place = a_study(database)
    job = give(place, "walk,start,minutes\nreturn,back,738.0000000000001\nreturn,front,12.34\n")

    seen = look(place, job)

    assert seen.ready
    assert [(offer.line, offer.column, offer.given, offer.offered) for offer in seen.offers] == [
        (2, "minutes", "738.0000000000001", "738.0"),
        (3, "minutes", "12.34", "12.3"),
    ]
    with pytest.raises(
        InputRefused,
        match=r"line 2, column minutes: 738.0000000000001 lies between two steps; agree to round it to 738\.0",
    ):
        take(place, job)
    assert take(place, job, round_offered=True) == (2, 1, 2)
    assert trial_detail(database, place.keeper, place.study_id, 1).trial.readings[0].text == "738.0"


def test_rows_without_a_reading_are_left_out_and_said(database: Database) -> None:
    place = a_study(database)
    job = give(place, "walk,start,minutes\nreturn,back,7.1\nreturn,front,\n\nserpentine,back,7.7\n")

    seen = look(place, job)

    assert seen.left_out == (3,)
    assert take(place, job)[0] == 2


def test_times_without_a_zone_are_the_sites_own_clock(database: Database) -> None:
    place = a_study(database)
    job = give(
        place, "walk,start,minutes,when\nreturn,back,7.1,2026-02-02 14:05\nreturn,back,7.1,2026-02-02T14:05+00:00\n"
    )

    take(place, job)

    hours = [trial_detail(database, place.keeper, place.study_id, number).trial.happened_at.hour for number in (1, 2)]
    assert hours == [13, 14]


def test_the_same_file_again_needs_a_tick(database: Database) -> None:
    place = a_study(database)
    take(place, give(place, GOOD))
    job = give(place, GOOD)

    assert look(place, job).earlier == "trials 1 to 3"
    with pytest.raises(AlreadyThere, match="the very same file is in this study as trials 1 to 3"):
        take(place, job)
    assert take(place, job, again=True) == (3, 4, 6)


def test_what_the_columns_meant_is_remembered_in_the_series(database: Database) -> None:
    place = a_study(database)
    heads = "Gang,Ende,Dauer\n"
    job = give(place, heads + "return,back,7.1\n")
    choices = (ColumnChoice("factor", "walk"), ColumnChoice("factor", "start"), ColumnChoice("response", "minutes"))
    run_import(database, place.keeper, place.study_id, job, choices=choices, round_offered=False, now=NOW)

    assert look(place, give(place, heads + "return,back,7.2\n")).choices == choices


def test_choices_that_leave_a_factor_without_column_are_refused(database: Database) -> None:
    place = a_study(database)
    job = give(place, "walk,end,minutes,again\nreturn,back,7.1,7.1\n")

    seen = look(place, job)
    twice = look(
        place,
        job,
        [
            ColumnChoice("factor", "walk"),
            ColumnChoice("factor", "walk"),
            ColumnChoice("skip"),
            ColumnChoice("response", "hours"),
        ],
    )

    assert [str(fault) for fault in seen.faults] == ["columns: no column chosen for start; choose exactly one"]
    assert "columns: 2 columns chosen for walk; choose exactly one" in [str(fault) for fault in twice.faults]
    assert "column again: 'hours' is no response of this study; choose one of minutes" in [
        str(fault) for fault in twice.faults
    ]


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"", "tours.csv: there is nothing in it; give a table with a row of heads and one trial a row"),
        (b"walk,start,minutes\n", "tours.csv: it has heads and no rows"),
        (b"walk,walk,minutes\nreturn,back,7.1\n", "2 columns are headed 'walk'"),
        (b"walk,,minutes\nreturn,back,7.1\n", "tours.csv, column 2: it has no head"),
        (b"walk,start,minutes\nreturn,back\n", "line 2: 2 values given; give 3, one for every head"),
        (b"walk,start,minutes\nreturn,b\xe4ck,7.1\n", "tours.csv, line 2: it is not text in UTF-8"),
        (b"walk,start,minutes\nreturn,\"back,7.1\n", "tours.csv, line 2:"),
        (b"walk,start\0,minutes\nreturn,back,7.1\n", "tours.csv, line 1: it is not plain text"),
        (b"x" * (20 * 1024 * 1024 + 1), "20.0 MB; give at most 20 MB"),
    ],
)  # fmt: skip
def test_a_file_that_is_no_table_is_refused_with_the_line(database: Database, content: bytes, said: str) -> None:
    place = a_study(database)

    with pytest.raises(InputRefused) as refusal:
        give(place, content)

    assert said in str(refusal.value)


def test_semicolons_a_byte_order_mark_and_quoted_newlines_are_read(database: Database) -> None:
    factor = FactorDraft("way", "treatment", ("by hand", 'cart; "big"'))
    place = a_study(database, factors=(factor, START))

    job = give(place, '\ufeffway;start;minutes;note\r\nby hand;back;7.1;"two\nlines"\r\n"cart; ""big""";front;x;\r\n')

    assert str(look(place, job).faults[0]).startswith("line 4, column minutes: 'x' given")


def test_blocks_are_read_like_factors(database: Database) -> None:
    place = a_study(database, factors=(WALK, START, SHIFT))

    assert take(place, give(place, "walk,start,shift,minutes\nreturn,back,late,7.1\n")) == (1, 1, 1)


def test_a_file_is_taken_in_only_once_and_only_while_the_study_runs(database: Database) -> None:
    place = a_study(database)
    job = give(place, GOOD)
    take(place, job)
    dropped = give(place, GOOD + "return,back,7.3\n")
    drop_upload(database, place.keeper, place.study_id, dropped, now=NOW)

    with pytest.raises(NotNow, match=r"tours\.csv is done already"):
        look(place, job)
    with pytest.raises(NotNow, match=r"tours\.csv is dropped already"):
        look(place, dropped)
    with pytest.raises(NotFound, match="there is no file 99; give the file again"):
        look(place, 99)


def test_notes_are_kept_beside_their_trials(database: Database) -> None:
    place = a_study(database)

    take(place, give(place, "walk,start,minutes,note\nreturn,back,7.1,cart squeaks\nreturn,back,7.1,\n"))

    notes = [trial_detail(database, place.keeper, place.study_id, number).trial.note for number in (1, 2)]
    assert notes == ["cart squeaks", ""]
