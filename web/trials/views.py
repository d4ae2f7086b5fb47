"""The trials of a study, and the forms that put one right."""

from __future__ import annotations

from dataclasses import replace
from typing import get_args

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import Fault, InputRefused, NotAllowed
from registry.services.study_card import study_card
from registry.services.trial_edit import (
    correct_reading,
    restore_reading,
    restore_trial,
    set_aside_reading,
    set_aside_trial,
)
from registry.services.trial_pages import TrialDetail, Which, trial_detail, trial_list
from web import shell
from web.forms import NO_FAULTS, Choice, Faults
from web.pages import render_page
from web.refusals import status_of
from web.trials.forms import CorrectForm, KeepForm
from web.trials.pages import TrialPage, TrialsPage

WHICH: tuple[Which, ...] = get_args(Which)


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("trials", __name__, template_folder="templates")
    base = "/studies/<key:study_id>/trials"
    made.add_url_rule(base, view_func=every)
    made.add_url_rule(f"{base}/<key:number>", view_func=one)
    made.add_url_rule(f"{base}/<key:number>/correct", view_func=corrected, methods=["POST"])
    made.add_url_rule(f"{base}/<key:number>/keep", view_func=kept, methods=["POST"])
    return made


def every(study_id: int) -> Response:
    """List the trials of a study."""
    which = next((known for known in WHICH if known == request.args.get("which")), WHICH[0])
    listed = trial_list(shell.database(), shell.person(), study_id, page=request.args.get("page", 1, int), which=which)
    return render_page(TrialsPage(listed.card, listed))


def one(study_id: int, number: int) -> Response:
    """Show one trial."""
    return _page(study_id, number, CorrectForm(), KeepForm(), NO_FAULTS)


def corrected(study_id: int, number: int) -> Response:
    """Correct a reading, or add one that was left out."""
    form = CorrectForm.read(request.form)
    try:
        correct_reading(
            shell.database(),
            shell.person(),
            study_id,
            number,
            response=form.response,
            text=form.text,
            reason=form.reason,
            now=shell.now(),
        )
    except InputRefused as refusal:
        return _page(study_id, number, form, KeepForm(), Faults.of(refusal), status=status_of(refusal))
    flash(f"Trial {number} is corrected: {form.response} reads {form.text.strip()}.")
    return redirect(url_for("trials.one", study_id=study_id, number=number), 303)


def kept(study_id: int, number: int) -> Response:
    """Set a trial or one of its readings aside, or restore it."""
    form = KeepForm.read(request.form)
    card = study_card(shell.database(), shell.person(), study_id)
    if not card.may("analyst"):
        raise NotAllowed(Fault(card.title, f"a {card.role} may not do this", "ask a keeper to make you analyst"))
    try:
        _turn(study_id, number, form)
    except InputRefused as refusal:
        # The service calls the field by its own name; on this page it stands beside another reason.
        faults = Faults(
            tuple(
                replace(fault, field=form.reason_field) if fault.field == "reason" else fault
                for fault in refusal.faults
            )
        )
        return _page(study_id, number, CorrectForm(), form, faults, status=status_of(refusal))
    subject = f"{form.response} of trial {number}" if form.response else f"Trial {number}"
    flash(f"{subject} is {'set aside' if form.turn == 'set_aside' else 'restored'}.")
    return redirect(url_for("trials.one", study_id=study_id, number=number), 303)


def _turn(study_id: int, number: int, form: KeepForm) -> None:
    args = (shell.database(), shell.person(), study_id, number)
    now, reason = shell.now(), form.keep_reason
    whole = form.what == "trial"
    if form.turn not in ("set_aside", "restore") or not (whole or form.response):
        raise InputRefused(Fault("what", "nothing chosen", "choose the trial or one of its readings", "what"))
    if form.turn == "set_aside" and whole:
        set_aside_trial(*args, reason=reason, now=now)
    elif form.turn == "set_aside":
        set_aside_reading(*args, response=form.response or "", reason=reason, now=now)
    elif whole:
        restore_trial(*args, reason=reason, now=now)
    else:
        restore_reading(*args, response=form.response or "", reason=reason, now=now)


def _page(
    study_id: int, number: int, correct: CorrectForm, keep: KeepForm, faults: Faults, *, status: int = 200
) -> Response:
    detail = trial_detail(shell.database(), shell.person(), study_id, number)
    page = TrialPage(
        card=detail.card,
        detail=detail,
        correct=correct,
        keep=keep,
        responses=_responses(detail),
        aside=_turnable(detail, kept_now=True),
        back=_turnable(detail, kept_now=False),
        faults=faults,
        no_faults=NO_FAULTS,
    )
    return render_page(page, status=status)


def _responses(detail: TrialDetail) -> tuple[Choice, ...]:
    known = {reading.response: reading.text for reading in detail.trial.readings}
    return tuple(
        Choice(line.name, f"{line.name}: {known[line.name]}" if line.name in known else f"{line.name}: none yet")
        for line in detail.card.responses
    )


def _turnable(detail: TrialDetail, *, kept_now: bool) -> tuple[Choice, ...]:
    """List what can be set aside (what is kept now), or what can be restored (what is not)."""
    trial = detail.trial
    whole = [Choice("trial", "the whole trial")] if trial.kept is kept_now else []
    parts = [
        Choice(f"reading:{reading.response}", f"only {reading.response}, {reading.text}")
        for reading in trial.readings
        if reading.kept is kept_now
    ]
    return (*whole, *parts)
