"""Who may do what: roles in a series, each covering the ones before it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, get_args

from registry.errors import Fault, NotAllowed, NotFound
from registry.storage.people import role_of
from registry.storage.studies import find_series, find_study

if TYPE_CHECKING:
    from registry.services.people import Person
    from registry.storage.tables import Series, Study

Role = Literal["viewer", "logger", "analyst", "keeper"]
ROLES: tuple[Role, ...] = get_args(Role)
MAY: dict[Role, str] = {
    "viewer": "read",
    "logger": "log trials",
    "analyst": "plan, start, close, import, correct and set aside",
    "keeper": "say who may do what",
}


def covers(role: Role, needed: Role) -> bool:
    """Whether a role covers another one."""
    return ROLES.index(role) >= ROLES.index(needed)


def role_in(session: Any, person: Person, series_id: int) -> Role | None:
    """Say which role somebody has in a series; a keeper of the registry is keeper of every series."""
    if person.keeper:
        return "keeper"
    found = role_of(session, person.id, series_id)
    return next((role for role in ROLES if role == found), None)


def require_series(session: Any, person: Person, series_id: int, *, at_least: Role) -> tuple[Series, Role]:
    """Find a series that somebody may use so; a stranger learns nothing, not even that it exists."""
    series = find_series(session, series_id)
    role = role_in(session, person, series_id) if series is not None else None
    if series is None or role is None:
        raise NotFound(Fault("series", f"there is no series {series_id} for you", "choose one from Studies"))
    _require(role, at_least, series.name)
    return series, role


def require_study(session: Any, person: Person, study: Study | int, *, at_least: Role) -> tuple[Study, Role]:
    """Find a study that somebody may use so; a stranger learns nothing, not even that it exists."""
    study_id = study if isinstance(study, int) else study.id
    row = find_study(session, study_id) if isinstance(study, int) else study
    role = role_in(session, person, row.series_id) if row is not None else None
    if row is None or role is None:
        raise NotFound(Fault("study", f"there is no study {study_id} for you", "choose one from Studies"))
    _require(role, at_least, row.title)
    return row, role


def _require(role: Role, at_least: Role, what: str) -> None:
    if not covers(role, at_least):
        raise NotAllowed(
            Fault(
                what,
                f"a {role} may {MAY[role]}",
                f"ask a keeper of the series to make you {at_least}, who may also {MAY[at_least]}",
            )
        )
