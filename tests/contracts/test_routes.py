"""Every route, for every role: who gets what. A route that is not in the table fails here.

One line a route and method: the address, then the status for each role, from somebody not
signed in to a keeper of the registry. ``{running}`` and the like stand for what ``World``
holds. What a form sends stands in ``FORMS``. Where a role is refused, it is refused before
anything of the study is shown: 404 for a stranger, who may not even know that it exists, and
403 for a role that is too small.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from io import BytesIO
from pathlib import Path

import pytest
from flask import Flask

from registry.services.access import ROLES
from registry.services.decisions import DecisionDraft, decide
from registry.services.levels import series_levels
from registry.services.opening import Database, open_registry
from registry.services.reader_links import LinkDraft, make_link
from registry.services.study_plan import PlanDraft, lock_plan, start_study
from registry.services.trial_import import read_upload
from tests.support.studies import (
    MINUTES,
    NOW,
    START,
    WALK,
    WRONG_PICK,
    a_study,
    another_study,
    close_a_study,
    even_readings,
)
from tests.support.visitors import Visitor, a_visitor, an_app, somebody, somebody_in

VISITORS = ("signed_out", "stranger", "viewer", "logger", "analyst", "keeper", "registry_keeper")
ADDRESS_OF: dict[str, str] = {
    "signed_out": "",
    "stranger": "stranger@example.org",
    "viewer": "viewer@example.org",
    "logger": "logger@example.org",
    "analyst": "analyst@example.org",
    "keeper": "series-keeper@example.org",
    "registry_keeper": "keeper@example.org",
}

TABLE = """
                                                                 out stranger viewer logger analyst keeper registry
static                  GET  /static/weft.css                    200 200      200    200    200     200    200
chart_script            GET  /static/plotly-0.min.js             404 404      404    404    404     404    404
upkeep.healthz          GET  /healthz                            200 200      200    200    200     200    200
people.sign_in_form     GET  /sign-in                            200 303      303    303    303     303    303
people.sign_in_try      POST /sign-in                            401 401      401    401    401     401    401
people.sign_out_now     POST /sign-out                           401 303      303    303    303     303    303
studies.home            GET  /                                   303 200      200    200    200     200    200
studies.new_series_form GET  /series/new                         303 403      403    403    403     403    200
studies.new_series_try  POST /series/new                         401 403      403    403    403     403    303
studies.new_study_form  GET  /series/{series}/studies/new        303 404      403    403    200     200    200
studies.new_study_try   POST /series/{series}/studies/new        401 404      403    403    303     303    303
study.show              GET  /studies/{running}                  303 404      200    200    200     200    200
study.record            GET  /studies/{running}/record.json      303 404      200    200    200     200    200
study.history           GET  /studies/{running}/history          303 404      200    200    200     200    200
study.plan              GET  /studies/{planned}/plan             303 404      200    200    200     200    200
study.plan_locked       POST /studies/{planned}/plan             401 404      403    403    303     303    303
study.started           POST /studies/{planned}/start            401 404      403    403    303     303    303
study.end               GET  /studies/{running}/end              303 404      403    403    200     200    200
study.ended             POST /studies/{running}/end              401 404      403    403    303     303    303
study.step              GET  /studies/{running}/step             303 404      403    403    200     200    200
study.step_taken        POST /studies/{running}/step             401 404      403    403    303     303    303
trials.every            GET  /studies/{running}/trials           303 404      200    200    200     200    200
trials.one              GET  /studies/{running}/trials/1         303 404      200    200    200     200    200
trials.corrected        POST /studies/{running}/trials/1/correct 401 404      403    403    303     303    303
trials.kept             POST /studies/{running}/trials/1/keep    401 404      403    403    303     303    303
log.sheet               GET  /studies/{running}/log              303 404      403    200    200     200    200
log.logged              POST /studies/{running}/log              401 404      403    303    303     303    303
log.skipped             POST /studies/{ordered}/skip             401 404      403    303    303     303    303
imports.upload          GET  /studies/{running}/import           303 404      403    403    200     200    200
imports.uploaded        POST /studies/{running}/import           401 404      403    403    303     303    303
imports.look            GET  /studies/{running}/import/{job}     303 404      403    403    200     200    200
imports.decided         POST /studies/{running}/import/{job}     401 404      403    403    303     303    303
across.compare          GET  /studies/{closed}/compare           303 404      200    200    200     200    200
across.compare_record   GET  /studies/{closed}/compare/record.json 303 404    200    200    200     200    200
across.recurrence       GET  /series/{series}/recurrence         303 404      200    200    200     200    200
across.recurrence_record GET /series/{series}/recurrence/record.json 303 404  200    200    200     200    200
decisions.every         GET  /studies/{closed}/decisions         303 404      200    200    200     200    200
decisions.decided       POST /studies/{closed}/decisions         401 404      403    403    303     303    303
decisions.looked_at     POST /studies/{closed}/decisions/1/held  401 404      403    403    303     303    303
levels.every            GET  /series/{series}/levels             303 404      200    200    200     200    200
levels.rename           GET  /series/{series}/levels/{level}/name 303 404     403    403    200     200    200
levels.renamed          POST /series/{series}/levels/{level}/name 401 404     403    403    303     303    303
levels.meaning          GET  /series/{series}/levels/{level}/meaning 303 404  403    403    200     200    200
levels.meaning_changed  POST /series/{series}/levels/{level}/meaning 401 404  403    403    303     303    303
links.every             GET  /series/{series}/links              303 404      403    403    200     200    200
links.new               GET  /series/{series}/links/new?scope=study&study={closed} 303 404 403 403 200 200 200
links.new_try           POST /series/{series}/links/new          401 404      403    403    201     201    201
links.revoked           POST /series/{series}/links/{link}/revoke 401 404     403    403    303     303    303
reader.page             GET  /r/{token}                          200 200      200    200    200     200    200
reader.record           GET  /r/{token}/record.json              200 200      200    200    200     200    200
"""

TOKEN = "a-token-that-nobody-guesses"
FILE = b"walk,start,minutes\nreturn,back,7.1\n"

FORMS: Mapping[str, Mapping[str, str | bytes]] = {
    "people.sign_in_try": {"address": "nobody@example.org", "password": "wrong"},
    "studies.new_series_try": {"name": "Packing"},
    "studies.new_study_try": {
        "title": "Next",
        "site": "Osierholm",
        "time_zone": "Europe/Copenhagen",
        "factors-0-name": "walk",
        "factors-0-role": "treatment",
        "factors-0-levels": "serpentine\nreturn",
        "responses-0-name": "minutes",
        "responses-0-unit": "min",
        "responses-0-step": "0.1",
        "responses-0-wanted": "lower",
        "responses-0-kind": "measured",
        "responses-0-part": "primary",
    },
    "study.plan_locked": {"per_cell": "4", "spread": "", "looks": "closed", "margins-minutes": "0.8"},
    "study.ended": {"reason": "early", "note": "enough seen"},
    "study.step_taken": {"response": "minutes", "step": "0.05", "reason": "a finer watch"},
    "trials.corrected": {"response": "minutes", "text": "7.2", "reason": "misread"},
    "trials.kept": {"turn": "set_aside", "what": "trial", "keep_reason": "the lift stood still"},
    "log.logged": {
        "key": "5a1f0a70-9d1f-4a40-8d0e-0f6e4b1c2d3e",
        "levels-walk": "return",
        "levels-start": "back",
        "readings-minutes": "7.3",
    },
    "log.skipped": {"run": "1", "skip_reason": "the conveyor stood still"},
    "imports.uploaded": {"file": FILE},
    "imports.decided": {"drop": "yes"},
    "levels.renamed": {"name": "there and back", "reason": "that is what the crews say"},
    "levels.meaning_changed": {"name": "return by the new lift", "definition": "back along the lift"},
    "decisions.decided": {"what": "largest gap from the back end", "review_day": "2026-06-02"},
    "decisions.looked_at": {"held": "yes", "note": "it saved what it should"},
    "links.new_try": {"scope": "study", "study": "1", "kind": "live", "days": "30"},
}


@dataclass(frozen=True)
class Line:
    """One line of the table."""

    endpoint: str
    method: str
    address: str
    statuses: tuple[int, ...]


@dataclass(frozen=True)
class World:
    """What the addresses of the table are filled in with."""

    series: int
    running: int
    planned: int
    job: int
    closed: int
    ordered: int
    level: int
    link: int
    token: str


LINES = tuple(
    Line(endpoint, method, address, tuple(int(status) for status in statuses))
    for endpoint, method, address, *statuses in (line.split() for line in TABLE.strip().splitlines()[1:])
)
POSTS = tuple(line for line in LINES if line.method == "POST")


def _fill(database: Database) -> World:
    """Make one person of each role, a running study with a trial and an upload, and a planned one."""
    place = a_study(database, responses=(MINUTES, WRONG_PICK))
    place.log({"walk": "return", "start": "back"}, {"minutes": "7.1"}, key=1)
    planned = another_study(database, place.keeper, place.series_id, title="Planned", started=False)
    job = read_upload(database, place.keeper, place.study_id, name="tours.csv", content=FILE, now=NOW)
    somebody(database, ADDRESS_OF["stranger"])
    for role in ROLES:
        somebody_in(database, place.keeper, place.series_id, role=role, address=ADDRESS_OF[role])
    readings = even_readings((WALK.levels, START.levels), lambda _: 20.0)
    closed = [close_a_study(place, title=title, readings=readings) for title in ("Winter", "Spring")]
    decide(database, place.keeper, closed[1], DecisionDraft("largest gap", "", "", "", ""), now=NOW)
    level = series_levels(database, place.keeper, place.series_id).factors[0].levels[0].id
    draft = LinkDraft("study", closed[0], None, None, "fixed", "")
    link = make_link(
        database, place.keeper, place.series_id, draft, token=TOKEN, draw=lambda _scope, _record: {}, now=NOW
    )
    ordered = another_study(database, place.keeper, place.series_id, title="In order", started=False)
    lock_plan(database, place.keeper, ordered, PlanDraft("2"), now=NOW, seed=1)
    start_study(database, place.keeper, ordered, now=NOW)
    return World(place.series_id, place.study_id, planned, job, closed[1], ordered, level, link, TOKEN)


@pytest.fixture(scope="module")
def filled(templates: Callable[[str], str], tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, World]:
    """Fill one registry that is copied for each case, so that no case sees what another did."""
    path = tmp_path_factory.mktemp("routes") / "filled.db"
    _copy(Path(templates("sqlite").removeprefix("sqlite:///")), path)
    database = open_registry(f"sqlite:///{path}")
    world = _fill(database)
    database.dispose()
    return path, world


def _copy(source: Path, target: Path) -> None:
    one, other = sqlite3.connect(source), sqlite3.connect(target)
    one.backup(other)
    one.close()
    other.close()


@pytest.fixture
def app(filled: tuple[Path, World], tmp_path: Path):  # type: ignore[no-untyped-def]
    """Give an application on a copy of the filled registry."""
    _copy(filled[0], tmp_path / "case.db")
    database = open_registry(f"sqlite:///{tmp_path / 'case.db'}")
    yield an_app(database)
    database.dispose()


def _ask(visitor: Visitor, line: Line, world: World) -> int:
    path = line.address.format(**asdict(world))
    if line.method == "GET":
        return visitor.get(path).status_code
    return visitor.post(path, _form(line)).status_code


def _form(line: Line) -> dict[str, object]:
    """Give what a form sends; bytes are the content of a file."""
    return {
        name: (BytesIO(value), "tours.csv") if isinstance(value, bytes) else value
        for name, value in FORMS.get(line.endpoint, {}).items()
    }


@pytest.mark.parametrize("who", VISITORS)
@pytest.mark.parametrize("line", LINES, ids=lambda line: f"{line.method} {line.endpoint}")
def test_every_route_answers_every_role_as_the_table_says(
    app: Flask, filled: tuple[Path, World], line: Line, who: str
) -> None:
    visitor = a_visitor(app, ADDRESS_OF[who])

    assert _ask(visitor, line, filled[1]) == line.statuses[VISITORS.index(who)]


def test_the_table_holds_every_route_and_method(app: Flask) -> None:
    routes = {
        (rule.endpoint, method)
        for rule in app.url_map.iter_rules()
        for method in (rule.methods or set()) - {"HEAD", "OPTIONS"}
    }

    assert {(line.endpoint, line.method) for line in LINES} == routes
    assert all(len(line.statuses) == len(VISITORS) for line in LINES)


def test_every_address_of_the_table_leads_to_its_endpoint(app: Flask, filled: tuple[Path, World]) -> None:
    adapter = app.url_map.bind("localhost")
    for line in LINES:
        path = line.address.format(**asdict(filled[1])).partition("?")[0]
        found, _ = adapter.match(path, method=line.method)
        assert found == line.endpoint


@pytest.mark.parametrize("line", POSTS, ids=lambda line: line.endpoint)
def test_a_form_without_the_mark_of_the_site_is_refused_everywhere(
    app: Flask, filled: tuple[Path, World], line: Line
) -> None:
    visitor = a_visitor(app, ADDRESS_OF["registry_keeper"])
    path = line.address.format(**asdict(filled[1]))

    without = visitor.client.post(path, data=_form(line), buffered=True)
    forged = visitor.client.post(path, data={**_form(line), "csrf_token": "forged"}, buffered=True)

    assert (without.status_code, forged.status_code) == (400, 400)


def test_looking_at_every_page_changes_nothing_in_the_record(
    app: Flask, filled: tuple[Path, World], tmp_path: Path
) -> None:
    visitor = a_visitor(app, ADDRESS_OF["registry_keeper"])
    before = _dump(tmp_path / "case.db")

    for line in LINES:
        if line.method == "GET":
            visitor.get(line.address.format(**asdict(filled[1])))

    assert _dump(tmp_path / "case.db") == before


def _dump(path: Path) -> list[str]:
    connection = sqlite3.connect(path)
    lines = list(connection.iterdump())
    connection.close()
    return lines
