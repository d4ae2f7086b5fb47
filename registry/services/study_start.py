"""Starting a study: its factors, levels, block and responses, all checked at once."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from decimal import Decimal
from math import prod
from typing import Any
from zoneinfo import available_timezones

from registry.errors import Fault, InputRefused, UnitRefused
from registry.services.access import require_series
from registry.services.people import Person
from registry.services.text_check import checked_margin, checked_name, checked_text
from registry.storage.engine import Database
from registry.storage.history import Happening, append_events, lock_registry
from registry.storage.studies import (
    cross_cells,
    factor_named,
    level_named,
    new_response,
    new_study_row,
    response_named,
    use_factor,
    use_response,
)
from registry.trials.readings import Step
from registry.trials.units import unit as find_unit

MOST_FACTORS = 6
MOST_CELLS = 4096
# Beyond these no reading of anything would be within the exact bounds of a tally.
SMALLEST_STEP, LARGEST_STEP = Decimal("1e-9"), Decimal("1e9")

WANTED = ("lower", "higher", "none")
KINDS = ("measured", "yes_no")
PARTS = ("primary", "guard")
FACTOR_ROLES = ("treatment", "block", "held")


@dataclass(frozen=True)
class FactorDraft:
    """A factor as somebody wants to use it; a held one has exactly one level."""

    name: str
    role: str
    levels: tuple[str, ...]


@dataclass(frozen=True)
class ResponseDraft:
    """A response as somebody wants to record it; step and margin as typed."""

    name: str
    about: str
    unit: str
    step: str
    margin: str
    wanted: str
    kind: str
    part: str


@dataclass(frozen=True)
class StudyDraft:
    """A study about to be started."""

    title: str
    question: str
    site: str
    time_zone: str
    factors: tuple[FactorDraft, ...]
    responses: tuple[ResponseDraft, ...]


@dataclass(frozen=True)
class _CheckedResponse:
    """A response that can be kept as it is."""

    draft: ResponseDraft
    dimension: str
    step: str
    margin: str | None


def new_study(database: Database, person: Person, series_id: int, draft: StudyDraft, *, now: datetime) -> int:
    """Start a study, planned and without trials; returns its key.

    Factors, levels and responses that the series knows by name are the same ones again;
    that is what lets studies be compared later. Raises InputRefused with every fault.
    """
    checked, factors, responses = _checked(draft)
    with database.write() as session:
        lock_registry(session)  # Two studies may bring the same new factor, level or response at once.
        require_series(session, person, series_id, at_least="analyst")
        _refuse_changed_meaning(session, series_id, responses)
        row = new_study_row(
            session,
            {
                "series_id": series_id,
                **checked,
                "created_at": now,
                "created_by": person.id,
                "started_at": None,
                "closed_at": None,
            },
        )
        cells = _use_factors(session, series_id, row.id, factors)
        _use_responses(session, series_id, row.id, responses)
        row.revision = 1
        after = json.dumps({"title": row.title, "combinations": cells}, ensure_ascii=False)
        append_events(session, row.id, [Happening("study_made", after=after)], person_id=person.id, now=now)
        return row.id


def _checked(draft: StudyDraft) -> tuple[dict[str, str], list[FactorDraft], list[_CheckedResponse]]:
    faults: list[Fault] = []
    fields = {
        "title": checked_name(draft.title, where="title", field="title", faults=faults),
        "question": checked_text(draft.question, where="question", field="question", faults=faults),
        "site": checked_name(draft.site, where="site", field="site", faults=faults),
        "time_zone": draft.time_zone.strip(),
    }
    if fields["time_zone"] not in available_timezones():
        faults.append(
            Fault("time zone", f"{draft.time_zone!r} given", "choose one, as in Europe/Copenhagen", "time_zone")
        )
    factors = [_checked_factor(place, factor, faults) for place, factor in enumerate(draft.factors)]
    _check_crossing(factors, faults)
    responses = [_checked_response(place, response, faults) for place, response in enumerate(draft.responses)]
    _check_names("response", [response.draft.name for response in responses], "responses", faults)
    if not responses:
        faults.append(Fault("responses", "none given", "say what is read off each trial", "responses"))
    if faults:
        raise InputRefused(faults)
    return fields, factors, responses


def _checked_factor(place: int, draft: FactorDraft, faults: list[Fault]) -> FactorDraft:
    field = f"factors-{place}"
    name = checked_name(draft.name, where=f"factor {place + 1}, name", field=f"{field}-name", faults=faults)
    where = f"factor {name or place + 1}"
    if draft.role not in FACTOR_ROLES:
        faults.append(
            Fault(f"{where}, role", f"{draft.role!r} given", "choose treatment, block or held", f"{field}-role")
        )
    levels = tuple(level for level in draft.levels if level.strip())
    levels = tuple(
        checked_name(level, where=f"{where}, level", field=f"{field}-levels", faults=faults) for level in levels
    )
    _check_names(f"{where}, level", levels, f"{field}-levels", faults)
    needed = "exactly one level" if draft.role == "held" else "at least two levels, one a line"
    if (draft.role == "held") != (len(levels) == 1) or not levels:
        faults.append(Fault(f"{where}, levels", f"{len(levels)} given", f"give {needed}", f"{field}-levels"))
    return FactorDraft(name, draft.role, levels)


def _check_names(what: str, names: Sequence[str], field: str, faults: list[Fault]) -> None:
    """Refuse the same name twice, also when only the case differs: one of the two is a slip."""
    seen: dict[str, str] = {}
    for name in names:
        twin = seen.setdefault(name.casefold(), name)
        if name and twin is not name:
            faults.append(Fault(what, f"{name!r} stands beside {twin!r}", "give each its own name", field))


def _check_crossing(factors: Sequence[FactorDraft], faults: list[Fault]) -> None:
    _check_names("factor", [factor.name for factor in factors], "factors", faults)
    treatments = sum(factor.role == "treatment" for factor in factors)
    if not 1 <= treatments <= MOST_FACTORS:
        faults.append(Fault("factors", f"{treatments} treatment factors given", f"give 1 to {MOST_FACTORS}", "factors"))
    blocks = sum(factor.role == "block" for factor in factors)
    if blocks > 1:
        faults.append(Fault("factors", f"{blocks} blocks given", "give at most one", "factors"))
    cells = prod(len(factor.levels) for factor in factors if factor.role != "held")
    if cells > MOST_CELLS:
        faults.append(Fault("factors", f"{cells} combinations", f"a study can hold {MOST_CELLS}", "factors"))


def _checked_response(place: int, draft: ResponseDraft, faults: list[Fault]) -> _CheckedResponse:
    field = f"responses-{place}"
    name = checked_name(draft.name, where=f"response {place + 1}, name", field=f"{field}-name", faults=faults)
    where = f"response {name or place + 1}"
    about = checked_text(draft.about, where=f"{where}, what it is", field=f"{field}-about", faults=faults)
    for what, given, codes in (
        ("wanted", draft.wanted, WANTED),
        ("kind", draft.kind, KINDS),
        ("part", draft.part, PARTS),
    ):
        if given not in codes:
            choice = " or ".join(code.replace("_", " / ") for code in codes)
            faults.append(Fault(f"{where}, {what}", f"{given!r} given", f"choose {choice}", f"{field}-{what}"))
    margin = checked_margin(draft.margin, where=f"{where}, margin", field=f"{field}-margin", faults=faults)
    # Yes and no are kept as 1 and 0, so their unit and step are not for choosing.
    unit, step = ("count", "1") if draft.kind == "yes_no" else (draft.unit, draft.step)
    dimension = "count"
    try:
        dimension = find_unit(unit).dimension
    except UnitRefused:
        faults.append(Fault(f"{where}, unit", f"{unit!r} given", "choose one from the list", f"{field}-unit"))
    try:
        parsed = Step.parse(step)
        step = str(parsed)
        if not SMALLEST_STEP <= parsed.size <= LARGEST_STEP:
            accepted = f"give a step from {SMALLEST_STEP:f} to {LARGEST_STEP:f}"
            faults.append(Fault(f"{where}, step", f"{step} given", accepted, f"{field}-step"))
    except InputRefused as error:
        fault = error.faults[0]
        faults.append(Fault(f"{where}, step", fault.given, fault.accepted, f"{field}-step"))
    checked = ResponseDraft(name, about, unit, step, draft.margin, draft.wanted, draft.kind, draft.part)
    return _CheckedResponse(checked, dimension, step, margin)


def _refuse_changed_meaning(session: Any, series_id: int, responses: Sequence[_CheckedResponse]) -> None:
    """Refuse a response whose name the series knows with another meaning: it would compare what is not the same."""
    faults = []
    for place, response in enumerate(responses):
        known = response_named(session, series_id, response.draft.name)
        if known is None:
            continue
        for what, given, before in (
            ("kind", response.draft.kind, known.kind),
            ("dimension", response.dimension, known.dimension),
            ("wanted", response.draft.wanted, known.wanted),
            ("part", response.draft.part, known.part),
            ("about", response.draft.about or known.about, known.about or response.draft.about),
        ):
            if given != before:
                faults.append(
                    Fault(
                        f"response {known.name}, {'what it is' if what == 'about' else what}",
                        f"{given.replace('_', ' / ')} given",
                        f"this series records it as {before.replace('_', ' / ')}; keep that, or choose another name",
                        f"responses-{place}-{'unit' if what == 'dimension' else what}",
                    )
                )
    if faults:
        raise InputRefused(faults)


def _use_factors(session: Any, series_id: int, study_id: int, factors: Sequence[FactorDraft]) -> int:
    """Place treatment factors first, then the block, then what is held; returns the number of cells."""
    ordered = sorted(factors, key=lambda factor: FACTOR_ROLES.index(factor.role))
    crossed: list[tuple[int, int, bool]] = []
    for position, draft in enumerate(ordered, start=1):
        factor = factor_named(session, series_id, draft.name)
        levels = [level_named(session, factor.id, name).id for name in draft.levels]
        _refuse_one_level_twice(draft, levels)
        use_factor(session, study_id, position, factor_id=factor.id, role=draft.role, level_ids=levels)
        if draft.role != "held":
            crossed.append((position, len(levels), draft.role == "block"))
    return cross_cells(session, study_id, crossed)


def _refuse_one_level_twice(draft: FactorDraft, level_ids: Sequence[int]) -> None:
    """Two names may be aliases of one level; a study cannot cross it with itself."""
    for place, level_id in enumerate(level_ids):
        first = level_ids.index(level_id)
        if first != place:
            raise InputRefused(
                Fault(
                    f"factor {draft.name}, levels",
                    f"{draft.levels[place]!r} is another name of {draft.levels[first]!r}",
                    "give each level once",
                    "factors",
                )
            )


def _use_responses(session: Any, series_id: int, study_id: int, responses: Sequence[_CheckedResponse]) -> None:
    for rank, response in enumerate(responses):
        draft = response.draft
        known = response_named(session, series_id, draft.name) or new_response(
            session,
            {
                "series_id": series_id,
                "name": draft.name,
                "about": draft.about,
                "dimension": response.dimension,
                "wanted": draft.wanted,
                "kind": draft.kind,
                "part": draft.part,
            },
        )
        use_response(
            session,
            study_id,
            rank,
            response_id=known.id,
            fields={"unit": draft.unit, "step": response.step, "margin": response.margin},
        )
