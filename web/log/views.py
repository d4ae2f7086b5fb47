"""Logging a trial at the work place."""

from __future__ import annotations

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import AlreadyThere, Fault, InputRefused, NotAllowed, NotNow
from registry.services.run_order import skip_run
from registry.services.study_card import StudyCard
from registry.services.trial_log import log_trials
from registry.services.trial_pages import LogSheet, log_sheet
from web import shell
from web.forms import NO_FAULTS, Choice, Faults, choices
from web.log.forms import SkipForm, TrialForm, factors_to_choose
from web.log.pages import LogPage
from web.pages import render_page
from web.refusals import status_of

NOTHING_SKIPPED = SkipForm()
YES_NO = choices((("no", "no"), ("yes", "yes")))


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("log", __name__, template_folder="templates")
    made.add_url_rule("/studies/<key:study_id>/log", view_func=sheet)
    made.add_url_rule("/studies/<key:study_id>/log", view_func=logged, methods=["POST"])
    made.add_url_rule("/studies/<key:study_id>/skip", view_func=skipped, methods=["POST"])
    return made


def sheet(study_id: int) -> Response:
    """Show the form to log one trial on; the block last logged stays chosen."""
    block = request.args.get("block", "")
    shown = _open_sheet(study_id, block=block)
    return render_page(_page(shown, _first_form(shown, block=block), NO_FAULTS))


def _first_form(shown: LogSheet, *, block: str) -> TrialForm:
    return TrialForm.first(shown.card, block=block, following=shown.order.following if shown.order else None)


def logged(study_id: int) -> Response:
    """Log one trial; the same form sent twice is one trial."""
    shown = log_sheet(shell.database(), shell.person(), study_id)
    form = TrialForm.read(request.form, shown.card)
    try:
        entry = form.entry(shown.card)
        (done,) = log_trials(shell.database(), shell.person(), study_id, [entry], now=shell.now())
    except (InputRefused, AlreadyThere) as refusal:
        kept = form.again() if isinstance(refusal, AlreadyThere) else form
        return render_page(_page(_open_sheet(study_id), kept, Faults.of(refusal)), status=status_of(refusal))
    levels = ", ".join(form.levels.values())
    readings = ", ".join(f"{name} {text.strip()}" for name, text in form.readings.items() if text.strip())
    again = "" if done.created else " It had arrived before and is counted once."
    flash(f"Trial {done.number} is logged: {levels}: {readings}.{again}")
    block = form.levels.get(shown.card.block.name) if shown.card.block else None
    return redirect(url_for("log.sheet", study_id=study_id, block=block), 303)


def skipped(study_id: int) -> Response:
    """Leave the next run out, with its reason."""
    form = SkipForm.read(request.form)
    position = int(form.run) if form.run.isascii() and form.run.isdigit() and len(form.run) < 10 else 0
    try:
        skip_run(shell.database(), shell.person(), study_id, position, reason=form.skip_reason, now=shell.now())
    except InputRefused as refusal:
        shown = _open_sheet(study_id)
        page = _page(shown, _first_form(shown, block=""), NO_FAULTS, skip=form, skip_faults=Faults.of(refusal))
        return render_page(page, status=status_of(refusal))
    flash(f"Run {position} is skipped and stays in the order with its reason.")
    return redirect(url_for("log.sheet", study_id=study_id), 303)


def _open_sheet(study_id: int, *, block: str = "") -> LogSheet:
    """Give the sheet to who may log on it, while the study runs."""
    shown = log_sheet(shell.database(), shell.person(), study_id, block=block or None)
    card: StudyCard = shown.card
    if not card.may("logger"):
        raise NotAllowed(Fault(card.title, f"a {card.role} may not log trials", "ask a keeper to make you logger"))
    if card.status != "running":
        raise NotNow(Fault("study", f"{card.title} is {card.status}", "trials are logged while a study runs"))
    return shown


def _page(
    shown: LogSheet,
    form: TrialForm,
    faults: Faults,
    *,
    skip: SkipForm = NOTHING_SKIPPED,
    skip_faults: Faults = NO_FAULTS,
) -> LogPage:
    factors = factors_to_choose(shown.card)
    return LogPage(
        card=shown.card,
        sheet=shown,
        factors=factors,
        levels={factor.name: tuple(Choice(level, level) for level in factor.levels) for factor in factors},
        form=form,
        fewest=min((cell.count for cell in shown.cells), default=0),
        uneven=len({cell.count for cell in shown.cells}) > 1,
        yes_no=YES_NO,
        faults=faults,
        skip=skip,
        skip_faults=skip_faults,
    )
