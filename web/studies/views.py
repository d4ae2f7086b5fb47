"""Studies home, new series, new study."""

from __future__ import annotations

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import AlreadyThere, Fault, InputRefused, NotAllowed
from registry.services.series_pages import SeriesDetail, new_series, series_detail
from registry.services.series_pages import home as home_of
from registry.services.study_card import study_card
from registry.services.study_start import new_study
from registry.trials.units import UNITS
from web import shell
from web.forms import NO_FAULTS, Choice, ChoiceGroup, Faults, choices
from web.pages import render_page
from web.refusals import status_of
from web.studies.forms import FormStep, NewSeriesForm, NewStudyForm, form_step
from web.studies.pages import HomePage, NewSeriesPage, NewStudyPage
from web.times import time_zones

EARLIER_OFFERED = 3

FACTOR_ROLES = choices(
    [
        ("treatment", "treatment"),
        ("block", "block"),
        ("held", "held at one level"),
    ]
)
WANTED = choices([("lower", "lower is better"), ("higher", "higher is better"), ("none", "neither way")])
KINDS = choices([("measured", "a number"), ("yes_no", "yes or no")])
PARTS = choices([("primary", "primary"), ("guard", "guard")])


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("studies", __name__, template_folder="templates")
    made.add_url_rule("/", view_func=home)
    made.add_url_rule("/series/new", view_func=new_series_form)
    made.add_url_rule("/series/new", view_func=new_series_try, methods=["POST"])
    made.add_url_rule("/series/<key:series_id>/studies/new", view_func=new_study_form)
    made.add_url_rule("/series/<key:series_id>/studies/new", view_func=new_study_try, methods=["POST"])
    return made


def home() -> Response:
    """Show every series as a row of studies in time."""
    found = home_of(shell.database(), shell.person())
    running = sum(study.status == "running" for series in found.series for study in series.studies)
    return render_page(HomePage(series=found.series, may_start_series=found.may_start_series, running=running))


def new_series_form() -> Response:
    """Show the form of a new series."""
    if not home_of(shell.database(), shell.person()).may_start_series:
        raise NotAllowed(Fault("series", "only a keeper of the registry may start one", "ask a keeper of the registry"))
    return render_page(NewSeriesPage(form=NewSeriesForm(), faults=NO_FAULTS))


def new_series_try() -> Response:
    """Start a series, or show the form again with what was typed."""
    form = NewSeriesForm.read(request.form)
    try:
        series_id = new_series(shell.database(), shell.person(), form.draft(), now=shell.now())
    except (InputRefused, AlreadyThere) as refusal:
        return render_page(NewSeriesPage(form=form, faults=Faults.of(refusal)), status=status_of(refusal))
    flash(f"The series {form.name.strip()} was started. Its first study comes next.")
    return redirect(url_for("studies.home", _anchor=f"series-{series_id}"), 303)


def new_study_form(series_id: int) -> Response:
    """Show the form of a new study, empty or filled in from an earlier one."""
    detail = _detail_for_analyst(series_id)
    last = detail.line.studies[-1] if detail.line.studies else None
    form = NewStudyForm(site=last.site, time_zone=last.time_zone) if last else NewStudyForm()
    like = request.args.get("like", type=int)
    if like is not None and any(study.id == like for study in detail.line.studies):
        form = NewStudyForm.like(study_card(shell.database(), shell.person(), like))
    return render_page(_new_study_page(detail, form))


def new_study_try(series_id: int) -> Response:
    """Make the study, or show the form again: with a row more or less, or with its faults."""
    detail = _detail_for_analyst(series_id)
    form = NewStudyForm.read(request.form)
    step = form_step(request.form.get("do", ""))
    if step is not None:
        form = form.changed(step)
        return render_page(_new_study_page(detail, form, focus=_focus_after(step, form)))
    form = form.compact()
    try:
        study_id = new_study(shell.database(), shell.person(), series_id, form.draft(), now=shell.now())
    except InputRefused as refusal:
        page = _new_study_page(detail, form, faults=Faults.of(refusal))
        return render_page(page, status=status_of(refusal))
    flash("The study was made. It is planned: nothing is logged until it is started.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def _detail_for_analyst(series_id: int) -> SeriesDetail:
    detail = series_detail(shell.database(), shell.person(), series_id)
    if not detail.line.may("analyst"):
        raise NotAllowed(
            Fault(
                detail.line.name,
                f"a {detail.line.role} may not start a study",
                "ask a keeper of the series to make you analyst",
            )
        )
    return detail


def _focus_after(step: FormStep, form: NewStudyForm) -> str:
    """Say where to go on typing: in the new row, or in the row that took the place of the one removed."""
    rows = form.factors if step.rows == "factors" else form.responses
    place = len(rows) - 1 if step.what == "add" else min(step.place, len(rows) - 1)
    return f"{step.rows}-{max(place, 0)}-name"


def _new_study_page(
    detail: SeriesDetail, form: NewStudyForm, *, faults: Faults = NO_FAULTS, focus: str = ""
) -> NewStudyPage:
    return NewStudyPage(
        series_id=detail.line.id,
        series_name=detail.line.name,
        earlier=detail.line.studies[::-1][:EARLIER_OFFERED],
        known_factors=detail.factors,
        known_responses=detail.responses,
        sites=detail.sites,
        zones=tuple(ChoiceGroup(region, choices((zone, zone) for zone in zones)) for region, zones in time_zones()),
        units=_units(),
        factor_roles=FACTOR_ROLES,
        wanted=WANTED,
        kinds=KINDS,
        parts=PARTS,
        form=form.with_room(),
        faults=faults,
        focus=focus,
    )


def _units() -> tuple[ChoiceGroup, ...]:
    groups: dict[str, list[Choice]] = {}
    for unit in UNITS:
        groups.setdefault(unit.dimension, []).append(Choice(unit.code, unit.name))
    return tuple(ChoiceGroup(dimension, tuple(units)) for dimension, units in groups.items())
