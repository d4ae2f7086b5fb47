"""One study: its report and record, its plan, start and end, its history."""

from __future__ import annotations

import secrets

from flask import Blueprint, flash, jsonify, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import Fault, InputRefused, NotAllowed, NotNow
from registry.services.history import study_history
from registry.services.plan_outlook import plan_outlook
from registry.services.study_card import StudyCard, study_card
from registry.services.study_plan import close_study, lock_plan, start_study, withdraw_study
from registry.services.study_report import report_record, study_report
from registry.services.trial_edit import change_step
from registry.services.trial_pages import trial_list
from web import shell
from web.forms import NO_FAULTS, Choice, Faults, choices
from web.pages import render_page
from web.refusals import status_of
from web.security.etags import with_etag
from web.study.figures import build_figure, lines_figure
from web.study.forms import EndForm, PlanForm, StepForm
from web.study.pages import EndPage, EventsPage, PlanPage, ReportPage, StepPage

RECENT = 5
MOST_SEEDS = 2**31
SPREADS = choices(
    (
        ("", "By the house rule"),
        ("shared", "Shared by all combinations"),
        ("own", "Each combination its own"),
    )
)
LOOKS = choices((("closed", "Closed until the end"), ("as_you_go", "Looks as you go")))
REASONS = choices(
    (
        ("size_reached", "The planned size is reached"),
        ("early", "It ends early"),
        ("extended", "It ran past the planned size on purpose"),
        ("withdraw", "It is given up"),
    )
)


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("study", __name__, template_folder="templates")
    base = "/studies/<key:study_id>"
    made.add_url_rule(base, view_func=show)
    made.add_url_rule(f"{base}/record.json", view_func=record)
    made.add_url_rule(f"{base}/plan", view_func=plan)
    made.add_url_rule(f"{base}/plan", view_func=plan_locked, methods=["POST"])
    made.add_url_rule(f"{base}/start", view_func=started, methods=["POST"])
    made.add_url_rule(f"{base}/end", view_func=end)
    made.add_url_rule(f"{base}/end", view_func=ended, methods=["POST"])
    made.add_url_rule(f"{base}/step", view_func=step)
    made.add_url_rule(f"{base}/step", view_func=step_taken, methods=["POST"])
    made.add_url_rule(f"{base}/history", view_func=history)
    return made


def show(study_id: int) -> Response:
    """Show what a study says of one of its responses."""
    card = study_card(shell.database(), shell.person(), study_id)
    return with_etag(lambda: _report(study_id), parts=[card.role, card.revision, request.query_string])


def _report(study_id: int) -> Response:
    asked = request.args
    report = study_report(
        shell.database(),
        shell.person(),
        study_id,
        response=asked.get("response"),
        row=asked.get("rows"),
        column=asked.get("columns"),
    )
    recent = trial_list(shell.database(), shell.person(), study_id, per_page=RECENT).trials
    return render_page(
        ReportPage(
            card=report.card,
            report=report,
            build_figure=build_figure(report),
            lines_figure=lines_figure(report),
            recent=recent,
            response_choices=tuple(Choice(line.name, line.name) for line in report.card.responses),
            factor_choices=tuple(Choice(factor.name, factor.name) for factor in report.card.factors),
            no_faults=NO_FAULTS,
        )
    )


def record(study_id: int) -> Response:
    """Give the report as a record: the page's JSON twin."""
    report = study_report(shell.database(), shell.person(), study_id, response=request.args.get("response"))
    return jsonify(report_record(report))


def plan(study_id: int) -> Response:
    """Show the plan, or the form that locks it."""
    card = study_card(shell.database(), shell.person(), study_id)
    return render_page(_plan_page(card, PlanForm.first(card), NO_FAULTS))


def _plan_page(card: StudyCard, form: PlanForm, faults: Faults) -> PlanPage:
    outlook = plan_outlook(shell.database(), shell.person(), card.id)
    return PlanPage(card, form, SPREADS, LOOKS, outlook, faults)


def plan_locked(study_id: int) -> Response:
    """Lock the plan."""
    card = _card_for_analyst(study_id)
    form = PlanForm.read(request.form, card)
    try:
        lock_plan(
            shell.database(),
            shell.person(),
            study_id,
            form.draft(),
            now=shell.now(),
            seed=secrets.randbelow(MOST_SEEDS),
        )
    except InputRefused as refusal:
        return render_page(_plan_page(card, form, Faults.of(refusal)), status=status_of(refusal))
    flash("The plan is locked and its run order drawn. Start the study when trials may come in.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def started(study_id: int) -> Response:
    """Let trials come in."""
    start_study(shell.database(), shell.person(), study_id, now=shell.now())
    flash("The study runs: trials can be logged.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def end(study_id: int) -> Response:
    """Show the form that closes or withdraws a study."""
    card = _card_for_analyst(study_id)
    if card.status not in ("planned", "running"):
        raise NotNow(Fault("study", f"{card.title} is {card.status}", "it has ended already"))
    return render_page(EndPage(card, EndForm("", ""), _reasons(card), NO_FAULTS))


def _reasons(card: StudyCard) -> tuple[Choice, ...]:
    """Give what can end a study: one that never ran can only be given up."""
    return REASONS if card.status == "running" else REASONS[-1:]


def ended(study_id: int) -> Response:
    """Close or withdraw a study."""
    card = _card_for_analyst(study_id)
    form = EndForm.read(request.form)
    database, person, now = shell.database(), shell.person(), shell.now()
    try:
        if form.reason == "withdraw":
            withdraw_study(database, person, study_id, note=form.note, now=now)
        else:
            close_study(database, person, study_id, reason=form.reason, note=form.note, now=now)
    except InputRefused as refusal:
        return render_page(EndPage(card, form, _reasons(card), Faults.of(refusal)), status=status_of(refusal))
    flash("The study is withdrawn." if form.reason == "withdraw" else "The study is closed.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def step(study_id: int) -> Response:
    """Show the form that takes a finer step."""
    card = _card_for_analyst(study_id)
    form = StepForm(card.responses[0].name, "", "")
    return render_page(StepPage(card, form, _steps(card), NO_FAULTS))


def _steps(card: StudyCard) -> tuple[Choice, ...]:
    measured = [line for line in card.responses if line.kind == "measured"]
    return choices((line.name, f"{line.name}, now in steps of {line.step} {line.unit}") for line in measured)


def step_taken(study_id: int) -> Response:
    """Take a finer step for a response."""
    card = _card_for_analyst(study_id)
    form = StepForm.read(request.form)
    try:
        change_step(
            shell.database(),
            shell.person(),
            study_id,
            response=form.response,
            step=form.step,
            reason=form.reason,
            now=shell.now(),
        )
    except InputRefused as refusal:
        return render_page(StepPage(card, form, _steps(card), Faults.of(refusal)), status=status_of(refusal))
    flash(f"{form.response} is recorded in steps of {form.step.strip()} from now on.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def history(study_id: int) -> Response:
    """Show what happened to a study."""
    found = study_history(shell.database(), shell.person(), study_id, page=request.args.get("page", 1, int))
    return render_page(EventsPage(found.card, found))


def _card_for_analyst(study_id: int) -> StudyCard:
    """Give the head of a study to who may change it; the service checks again when it is changed."""
    card = study_card(shell.database(), shell.person(), study_id)
    if not card.may("analyst"):
        raise NotAllowed(Fault(card.title, f"a {card.role} may not do this", "ask a keeper to make you analyst"))
    return card
