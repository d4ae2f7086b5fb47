"""Studies side by side: comparison and recurrence board, each with its JSON twin."""

from __future__ import annotations

from flask import Blueprint, jsonify, request
from werkzeug.wrappers import Response

from registry.errors import Fault, NotFound
from registry.services.comparison import Comparison, compare_studies
from registry.services.recurrence_board import RecurrenceBoard, recurrence_board
from registry.services.study_card import study_card
from web import shell
from web.across.figures import board_figure, change_figure
from web.across.pages import BoardPage, ComparePage
from web.forms import NO_FAULTS, Choice
from web.pages import render_page


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("across", __name__, template_folder="templates")
    made.add_url_rule("/studies/<key:study_id>/compare", view_func=compare)
    made.add_url_rule("/studies/<key:study_id>/compare/record.json", view_func=compare_record)
    made.add_url_rule("/series/<key:series_id>/recurrence", view_func=recurrence)
    made.add_url_rule("/series/<key:series_id>/recurrence/record.json", view_func=recurrence_record)
    return made


def compare(study_id: int) -> Response:
    """Show what changed between a study and an earlier one."""
    comparison = _comparison(study_id)
    other = comparison.first if comparison.second.id == study_id else comparison.second
    return render_page(
        ComparePage(
            card=study_card(shell.database(), shell.person(), study_id),
            comparison=comparison,
            figure=change_figure(comparison),
            beside=str(other.id),
            studies=tuple(
                Choice(str(head.id), f"{head.title} ({head.site})") for head in comparison.others if head.id != study_id
            ),
            responses=tuple(Choice(name, name) for name in comparison.measured),
            no_faults=NO_FAULTS,
        )
    )


def compare_record(study_id: int) -> Response:
    """Give the comparison as a record: the page's JSON twin."""
    return jsonify(_comparison(study_id).record)


def _comparison(study_id: int) -> Comparison:
    return compare_studies(
        shell.database(),
        shell.person(),
        study_id,
        beside=_beside(request.args.get("with", "")),
        response=request.args.get("response") or None,
    )


def _beside(text: str) -> int | None:
    """Read which study to set beside; what is no key is no study, and nothing asks for the one before."""
    if text and not (text.isascii() and text.isdigit() and len(text) < 10):
        raise NotFound(Fault("study to compare with", f"{text!r} given", "choose one from the list", "with"))
    return int(text) if text else None


def recurrence(series_id: int) -> Response:
    """Show every interaction of a series with its verdict."""
    board = _board(series_id)
    return render_page(
        BoardPage(board, board_figure(board), tuple(Choice(name, name) for name in board.measured), NO_FAULTS)
    )


def recurrence_record(series_id: int) -> Response:
    """Give the board as a record: the page's JSON twin."""
    return jsonify(_board(series_id).record)


def _board(series_id: int) -> RecurrenceBoard:
    return recurrence_board(shell.database(), shell.person(), series_id, response=request.args.get("response") or None)
