"""Importing a file of trials: given, looked at, taken in."""

from __future__ import annotations

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import AlreadyThere, Fault, InputRefused, NotAllowed, NotNow
from registry.services.import_check import ColumnChoice
from registry.services.study_card import StudyCard, study_card
from registry.services.trial_import import COLUMN_KINDS, Preview, drop_upload, preview, read_upload, run_import
from web import shell
from web.forms import NO_FAULTS, Choice, Faults, choices
from web.imports.pages import PreviewPage, UploadPage
from web.marks import takes_up_to
from web.pages import render_page
from web.refusals import status_of

# A little more than the largest file, for the form around it.
LARGEST_REQUEST = 21_500_000
OTHER_KINDS = choices((("happened_at", "when it happened"), ("note", "a note"), ("skip", "nothing: leave it out")))


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("imports", __name__, template_folder="templates")
    base = "/studies/<key:study_id>/import"
    made.add_url_rule(base, view_func=upload)
    made.add_url_rule(base, view_func=uploaded, methods=["POST"])
    made.add_url_rule(f"{base}/<key:job>", view_func=look)
    made.add_url_rule(f"{base}/<key:job>", view_func=decided, methods=["POST"])
    return made


def upload(study_id: int) -> Response:
    """Show the form that takes a file."""
    card = _open_card(study_id)
    return render_page(UploadPage(card, _heads(card), NO_FAULTS))


@takes_up_to(LARGEST_REQUEST)
def uploaded(study_id: int) -> Response:
    """Keep a file and go on to its preview."""
    card = _open_card(study_id)
    file = request.files.get("file")
    if file is None or not file.filename:
        faults = Faults((Fault("file", "no file given", "choose a CSV file or a workbook (.xlsx)", "file"),))
        return render_page(UploadPage(card, _heads(card), faults), status=422)
    try:
        job = read_upload(
            shell.database(),
            shell.person(),
            study_id,
            name=file.filename,
            content=file.stream.read(),
            now=shell.now(),
        )
    except InputRefused as refusal:
        return render_page(UploadPage(card, _heads(card), Faults.of(refusal)), status=status_of(refusal))
    return redirect(url_for("imports.look", study_id=study_id, job=job), 303)


def _heads(card: StudyCard) -> str:
    names = [factor.name for factor in (*card.factors, *([card.block] if card.block else []))]
    return ", ".join([*names, *(line.name for line in card.responses)])


def look(study_id: int, job: int) -> Response:
    """Show what a file would bring."""
    return render_page(_page(_preview(study_id, job, None), NO_FAULTS))


def decided(study_id: int, job: int) -> Response:
    """Look again with other choices, take the file in, or drop it."""
    if "drop" in request.form:
        drop_upload(shell.database(), shell.person(), study_id, job, now=shell.now())
        flash("The file is dropped; nothing was written.")
        return redirect(url_for("study.show", study_id=study_id), 303)
    chosen = _choices()
    if "take" not in request.form:
        return render_page(_page(_preview(study_id, job, chosen), NO_FAULTS))
    try:
        done = run_import(
            shell.database(),
            shell.person(),
            study_id,
            job,
            choices=chosen,
            round_offered="round_offered" in request.form,
            again="again" in request.form,
            now=shell.now(),
        )
    except (InputRefused, AlreadyThere) as refusal:
        page = _page(_preview(study_id, job, chosen), Faults.of(refusal))
        return render_page(page, status=status_of(refusal))
    trials = "1 trial is" if done.rows == 1 else f"{done.rows} trials are"
    flash(f"{trials} taken in: {done.first} to {done.last}.")
    return redirect(url_for("study.show", study_id=study_id), 303)


def _preview(study_id: int, job: int, chosen: list[ColumnChoice] | None) -> Preview:
    return preview(shell.database(), shell.person(), study_id, job, choices=chosen, now=shell.now())


def _choices() -> list[ColumnChoice]:
    """Read what each column means: a kind, or a kind and the name it stands for."""
    read = []
    for at in range(sum(name.startswith("choice-") for name in request.form)):
        code, _, target = request.form.get(f"choice-{at}", "skip").partition(":")
        kind = next((known for known in COLUMN_KINDS if known == code), None)
        if kind is None:
            raise InputRefused(Fault(f"column {at + 1}", f"{code!r} given", "choose from the list", f"choice-{at}"))
        read.append(ColumnChoice(kind, target))
    return read


def _page(seen: Preview, faults: Faults) -> PreviewPage:
    return PreviewPage(
        card=seen.card,
        preview=seen,
        options=_options(seen.card),
        chosen=tuple(f"{choice.kind}:{choice.target}" if choice.target else choice.kind for choice in seen.choices),
        round_offered="round_offered" in request.form,
        again="again" in request.form,
        faults=faults,
    )


def _options(card: StudyCard) -> tuple[Choice, ...]:
    factors = (*card.factors, *([card.block] if card.block else []), *card.held)
    return (
        *(Choice(f"factor:{factor.name}", f"factor {factor.name}") for factor in factors),
        *(Choice(f"response:{line.name}", f"response {line.name}") for line in card.responses),
        *OTHER_KINDS,
    )


def _open_card(study_id: int) -> StudyCard:
    """Give the head of a study to who may import into it, while it runs."""
    card = study_card(shell.database(), shell.person(), study_id)
    if not card.may("analyst"):
        raise NotAllowed(Fault(card.title, f"a {card.role} may not import trials", "ask a keeper to make you analyst"))
    if card.status != "running":
        raise NotNow(Fault("study", f"{card.title} is {card.status}", "trials are imported while a study runs"))
    return card
