"""People sign in with what they know; everything else is refused alike."""

from __future__ import annotations

from datetime import timedelta

import pytest

from registry.errors import AlreadyThere, InputRefused, NotAllowed, NotFound, SignInRefused
from registry.services.opening import Database
from registry.services.people import add_person, grant, person_of_session, sign_in, sign_out
from registry.services.series_pages import SeriesDraft, home, new_series
from tests.support.studies import CHEAP, NOW, PASSWORD, a_keeper, a_study


def test_somebody_who_knows_the_password_is_signed_in_until_the_hours_are_over(database: Database) -> None:
    keeper = a_keeper(database)

    signed = sign_in(database, address=" Keeper@Example.org", password=PASSWORD, now=NOW, hashing=CHEAP, hours=12)

    assert signed.person == keeper
    assert person_of_session(database, signed.token, now=NOW + timedelta(hours=11)) == keeper
    assert person_of_session(database, signed.token, now=NOW + timedelta(hours=12)) is None
    sign_out(database, signed.token)
    assert person_of_session(database, signed.token, now=NOW) is None


@pytest.mark.parametrize(
    ("address", "password"), [("keeper@example.org", "wrong password"), ("nobody@example.org", PASSWORD)]
)
def test_a_wrong_password_and_an_unknown_address_are_refused_alike(
    database: Database, address: str, password: str
) -> None:
    a_keeper(database)

    with pytest.raises(SignInRefused, match="sign-in: this address and password do not belong together; check both"):
        sign_in(database, address=address, password=password, now=NOW, hashing=CHEAP, hours=1)


def test_a_person_needs_a_name_an_address_and_a_long_password(database: Database) -> None:
    with pytest.raises(InputRefused) as refusal:
        add_person(database, name=" ", address="kim", password="short", keeper=True, now=NOW, hashing=CHEAP)

    assert [fault.field for fault in refusal.value.faults] == ["name", "address", "password"]
    a_keeper(database)
    with pytest.raises(AlreadyThere, match="keeper@example.org has an account already"):
        a_keeper(database)


def test_a_stranger_sees_no_series_and_a_member_sees_theirs(database: Database) -> None:
    place = a_study(database)
    other = add_person(
        database, name="Vera", address="vera@example.org", password=PASSWORD, keeper=False, now=NOW, hashing=CHEAP
    )

    before = home(database, other)
    grant(database, place.keeper, place.series_id, address="vera@example.org", role="viewer", now=NOW)

    assert before.series == ()
    assert [(line.name, line.role) for line in home(database, other).series] == [("Pick tours", "viewer")]
    with pytest.raises(NotAllowed, match="only a keeper of the registry may start one"):
        new_series(database, other, SeriesDraft("Mine", ""), now=NOW)
    with pytest.raises(NotFound, match="nobody has the address else@example.org"):
        grant(database, place.keeper, place.series_id, address="else@example.org", role="viewer", now=NOW)
