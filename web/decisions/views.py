"""Decisions on a study: listed, taken, looked at again."""

from __future__ import annotations

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import InputRefused
from registry.services.decisions import decide, say_whether_it_held, study_decisions
from web import shell
from web.decisions.forms import DecisionForm, HeldForm
from web.decisions.pages import DecisionsPage
from web.forms import NO_FAULTS, Faults, choices
from web.pages import render_page
from web.refusals import status_of

ANSWERS = choices((("yes", "It held"), ("partly", "It held in part"), ("no", "It did not hold")))
NEW = DecisionForm()
NONE_ASKED = HeldForm()


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("decisions", __name__, template_folder="templates")
    base = "/studies/<key:study_id>/decisions"
    made.add_url_rule(base, view_func=every)
    made.add_url_rule(base, view_func=decided, methods=["POST"])
    made.add_url_rule(f"{base}/<key:number>/held", view_func=looked_at, methods=["POST"])
    return made


def every(study_id: int) -> Response:
    """List the decisions of a study, with the form of a new one."""
    return _page(study_id)


def decided(study_id: int) -> Response:
    """Set down a decision."""
    form = DecisionForm.read(request.form)
    try:
        decide(shell.database(), shell.person(), study_id, form.draft(), now=shell.now())
    except InputRefused as refusal:
        return _page(study_id, form=form, faults=Faults.of(refusal), status=status_of(refusal))
    flash("The decision is set down.")
    return redirect(url_for("decisions.every", study_id=study_id), 303)


def looked_at(study_id: int, number: int) -> Response:
    """Set down whether a decision held."""
    form = HeldForm.read(number, request.form)
    try:
        say_whether_it_held(
            shell.database(), shell.person(), study_id, number, held=form.held, note=form.note, now=shell.now()
        )
    except InputRefused as refusal:
        return _page(study_id, held=form, held_faults=Faults.of(refusal), status=status_of(refusal))
    flash(f"It is set down whether decision {number} held.")
    return redirect(url_for("decisions.every", study_id=study_id), 303)


def _page(
    study_id: int,
    *,
    form: DecisionForm = NEW,
    faults: Faults = NO_FAULTS,
    held: HeldForm = NONE_ASKED,
    held_faults: Faults = NO_FAULTS,
    status: int = 200,
) -> Response:
    found = study_decisions(shell.database(), shell.person(), study_id, today=shell.now().date())
    return render_page(DecisionsPage(found.card, found, form, faults, held, held_faults, ANSWERS), status=status)
