"""Levels of a series: listed, renamed, given another meaning."""

from __future__ import annotations

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import AlreadyThere, Fault, InputRefused, NotAllowed, NotFound
from registry.services.access import covers
from registry.services.levels import LevelLine, SeriesLevels, change_meaning, rename_level, series_levels
from web import shell
from web.forms import NO_FAULTS, Faults
from web.levels.forms import MeaningForm, RenameForm
from web.levels.pages import LevelsPage, MeaningPage, RenamePage
from web.pages import render_page
from web.refusals import status_of


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("levels", __name__, template_folder="templates")
    base = "/series/<key:series_id>/levels"
    made.add_url_rule(base, view_func=every)
    made.add_url_rule(f"{base}/<key:level_id>/name", view_func=rename)
    made.add_url_rule(f"{base}/<key:level_id>/name", view_func=renamed, methods=["POST"])
    made.add_url_rule(f"{base}/<key:level_id>/meaning", view_func=meaning)
    made.add_url_rule(f"{base}/<key:level_id>/meaning", view_func=meaning_changed, methods=["POST"])
    return made


def every(series_id: int) -> Response:
    """List the levels of a series."""
    found = series_levels(shell.database(), shell.person(), series_id)
    return render_page(LevelsPage(found, covers(found.role, "analyst")))


def rename(series_id: int, level_id: int) -> Response:
    """Show the form that renames a level."""
    found, factor, level = _level(series_id, level_id)
    return render_page(RenamePage(found, factor, level, RenameForm(), NO_FAULTS))


def renamed(series_id: int, level_id: int) -> Response:
    """Rename a level."""
    found, factor, level = _level(series_id, level_id)
    form = RenameForm.read(request.form)
    try:
        rename_level(
            shell.database(),
            shell.person(),
            series_id,
            level_id,
            name=form.name,
            reason=form.reason,
            now=shell.now(),
        )
    except (InputRefused, AlreadyThere) as refusal:
        page = RenamePage(found, factor, level, form, Faults.of(refusal))
        return render_page(page, status=status_of(refusal))
    flash(f"{level.name} is called {form.name.strip()} from now on.")
    return redirect(url_for("levels.every", series_id=series_id), 303)


def meaning(series_id: int, level_id: int) -> Response:
    """Show the form that sets down a changed meaning."""
    found, factor, level = _level(series_id, level_id)
    return render_page(MeaningPage(found, factor, level, MeaningForm(), NO_FAULTS))


def meaning_changed(series_id: int, level_id: int) -> Response:
    """Set down that a level means something else from now on."""
    found, factor, level = _level(series_id, level_id)
    form = MeaningForm.read(request.form)
    try:
        change_meaning(
            shell.database(),
            shell.person(),
            series_id,
            level_id,
            name=form.name,
            definition=form.definition,
            now=shell.now(),
        )
    except (InputRefused, AlreadyThere) as refusal:
        page = MeaningPage(found, factor, level, form, Faults.of(refusal))
        return render_page(page, status=status_of(refusal))
    flash(f"{form.name.strip()} is a level of its own from now on; studies so far keep {level.name}.")
    return redirect(url_for("levels.every", series_id=series_id), 303)


def _level(series_id: int, level_id: int) -> tuple[SeriesLevels, str, LevelLine]:
    """Find a level for who may change it; the service checks again when it is changed."""
    found = series_levels(shell.database(), shell.person(), series_id)
    if not covers(found.role, "analyst"):
        raise NotAllowed(
            Fault(found.series_name, f"a {found.role} may not do this", "ask a keeper to make you analyst")
        )
    for factor in found.factors:
        for level in factor.levels:
            if level.id == level_id:
                return found, factor.name, level
    raise NotFound(Fault("level", f"this series has no level {level_id}", "choose one from its levels"))
