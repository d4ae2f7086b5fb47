"""People with an account, signing in and out, and roles in a series."""

from __future__ import annotations

import re
import secrets
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import TYPE_CHECKING

from registry.errors import AlreadyThere, Fault, InputRefused, NotFound, SignInRefused
from registry.services.access import ROLES, Role, require_series
from registry.services.settings import PasswordCost
from registry.storage.engine import Database
from registry.storage.history import append_registry_event
from registry.storage.people import (
    close_session,
    count_people,
    new_person,
    open_session,
    person_by_address,
    person_of_token,
    set_role,
)

if TYPE_CHECKING:
    from argon2 import PasswordHasher

    from registry.storage.tables import Person as PersonRow

LEAST_PASSWORD = 10
LONGEST_PASSWORD = 1000
_ADDRESS = re.compile(r"[^\s@]+@[^\s@]+")


@dataclass(frozen=True)
class Person:
    """Somebody with an account; ``keeper`` means of the whole registry."""

    id: int
    name: str
    address: str
    keeper: bool


@dataclass(frozen=True)
class SignedIn:
    """A session just opened; the token is shown once and kept only as a hash."""

    token: str
    person: Person
    expires: datetime


def add_person(
    database: Database,
    *,
    name: str,
    address: str,
    password: str,
    keeper: bool,
    now: datetime,
    hashing: PasswordCost,
    by: Person | None = None,
) -> Person:
    """Add somebody with a password; ``by`` is who added them, nobody when the registry is set up."""
    name, address = name.strip(), address.strip().lower()
    _refuse_bad_person(name, address, password)
    hashed = _hasher(hashing).hash(password)
    with database.write() as session:
        if person_by_address(session, address) is not None:
            raise AlreadyThere(
                Fault("address", f"{address} has an account already", "sign in with it, or give another", "address")
            )
        row = new_person(session, name=name, address=address, password_hash=hashed, keeper=keeper, now=now)
        append_registry_event(session, "person_added", person_id=by.id if by else row.id, after=f"{row.id}", now=now)
        return _person(row)


def _refuse_bad_person(name: str, address: str, password: str) -> None:
    faults = []
    if not 1 <= len(name) <= 200:
        faults.append(Fault("name", f"{len(name)} characters given", "give 1 to 200", "name"))
    if not _ADDRESS.fullmatch(address) or len(address) > 200:
        faults.append(
            Fault("address", f"{address!r} given", "give an e-mail address, as in kim@example.org", "address")
        )
    if not LEAST_PASSWORD <= len(password) <= LONGEST_PASSWORD:
        faults.append(
            Fault("password", f"{len(password)} characters given", f"give at least {LEAST_PASSWORD}", "password")
        )
    if faults:
        raise InputRefused(faults)


def _hasher(cost: PasswordCost) -> PasswordHasher:
    from argon2 import PasswordHasher

    return PasswordHasher(time_cost=cost.time, memory_cost=cost.memory_kib, parallelism=cost.lanes)


def _person(row: PersonRow) -> Person:
    return Person(row.id, row.name, row.address, row.keeper)


def anybody_there(database: Database) -> bool:
    """Whether the registry has any account yet."""
    with database.read() as session:
        return count_people(session) > 0


def sign_in(
    database: Database, *, address: str, password: str, now: datetime, hashing: PasswordCost, hours: int
) -> SignedIn:
    """Open a session for somebody who knows the password; every refusal reads and takes the same."""
    hasher = _hasher(hashing)
    with database.read() as session:
        row = person_by_address(session, address)
        open_to = row if row is not None and row.shut_out_at is None else None
        person = _person(open_to) if open_to else None
        hashed = open_to.password_hash if open_to else None
    right = _right(hasher, hashed, password)
    if person is None or not right:
        raise SignInRefused(
            Fault("sign-in", "this address and password do not belong together", "check both and try again", "password")
        )
    token, expires = secrets.token_urlsafe(32), now + timedelta(hours=hours)
    with database.write() as session:
        open_session(session, person.id, token, now=now, expires=expires)
    return SignedIn(token, person, expires)


def _right(hasher: PasswordHasher, hashed: str | None, password: str) -> bool:
    from argon2.exceptions import VerificationError

    given = password[:LONGEST_PASSWORD]
    if hashed is None:
        # One hash is made here too, so that an unknown address takes as long as a wrong password.
        hasher.hash(given)
        return False
    try:
        return hasher.verify(hashed, given)
    except VerificationError:
        return False


def person_of_session(database: Database, token: str, *, now: datetime) -> Person | None:
    """Say who a session's token belongs to; nobody when it has run out."""
    with database.read() as session:
        row = person_of_token(session, token, now=now)
        return _person(row) if row else None


def sign_out(database: Database, token: str) -> None:
    """End a session."""
    with database.write() as session:
        close_session(session, token)


def grant(database: Database, by: Person, series_id: int, *, address: str, role: Role, now: datetime) -> None:
    """Give somebody a role in a series."""
    if role not in ROLES:
        raise InputRefused(Fault("role", f"{role!r} given", "choose one of " + ", ".join(ROLES), "role"))
    with database.write() as session:
        series, _ = require_series(session, by, series_id, at_least="keeper")
        row = person_by_address(session, address)
        if row is None:
            raise NotFound(Fault("address", f"nobody has the address {address}", "add the person first", "address"))
        before = set_role(session, row.id, series.id, role=role, now=now)
        append_registry_event(
            session,
            "role_granted",
            person_id=by.id,
            before=before,
            after=f"{role} in series {series.id} to person {row.id}",
            now=now,
        )
