"""Errors as answers: each class of refusal has a status, a heading, and a page or problem details."""

from __future__ import annotations

import secrets
from collections.abc import Sequence
from dataclasses import dataclass, field
from http import HTTPStatus
from typing import ClassVar

from flask import Flask, current_app, json, request
from flask_wtf.csrf import CSRFError
from werkzeug.exceptions import HTTPException
from werkzeug.wrappers import Response

from registry import errors
from registry.errors import Fault, RegistryError
from web.pages import Page, render_page
from web.wanted import wants_json

STATUS_OF: dict[type[RegistryError], int] = {
    errors.InputRefused: 422,
    errors.ReadingRefused: 422,
    errors.OffGrid: 422,
    errors.UnitRefused: 422,
    errors.SignInRefused: 401,
    errors.NotAllowed: 403,
    errors.NotFound: 404,
    errors.NotNow: 409,
    errors.AlreadyThere: 409,
    errors.RecordDamaged: 500,
    errors.DatabaseNotReady: 503,
    errors.SettingMissing: 500,
}

HEADING_OF: dict[int, str] = {
    400: "This request could not be read",
    401: "You are not signed in",
    403: "Your role does not cover this",
    404: "There is no such page for you",
    405: "This address does not take that",
    409: "This does not fit what is recorded",
    413: "That was too much at once",
    415: "This address does not read that kind of content",
    422: "This was not accepted",
    429: "Too many tries",
    500: "Something went wrong here",
    503: "The registry cannot answer now",
}

EXPLANATION_OF: dict[int, str] = {
    404: "Nothing is kept at this address, or it is not yours to see. Start again from Studies.",
    405: "Go back, and use the buttons and links of the page.",
    429: "Wait a quarter of an hour, then try again.",
}


@dataclass(frozen=True)
class KeptForm:
    """A form that came after its sign-in had run out, ready to be sent once more."""

    path: str
    fields: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class ErrorPage(Page):
    """What is shown when a page cannot be."""

    template: ClassVar[str] = "error.html"

    heading: str = field(metadata={"help": "what happened, in one line"})
    faults: tuple[Fault, ...] = field(metadata={"help": "what was given, where, and what would be accepted"})
    explanation: str = field(metadata={"help": "what to do, where no fault says it"})
    reference: str = field(metadata={"help": "the id under which an unexpected error was logged, or nothing"})
    offer_sign_in: bool = field(metadata={"help": "whether signing in would help"})
    kept: KeptForm | None = field(metadata={"help": "the form that was sent, where signing in would let it through"})


def install(app: Flask) -> None:
    """Answer every error as a page or as problem details, by what was asked for."""
    app.register_error_handler(RegistryError, _refused)
    app.register_error_handler(CSRFError, _forged)
    app.register_error_handler(HTTPException, _http_error)
    app.register_error_handler(Exception, _unexpected)


def status_of(error: RegistryError) -> int:
    """Say the status of a refusal; a class that is not in the table is not known here, and that is an error."""
    return STATUS_OF[type(error)]


def _refused(error: RegistryError) -> Response:
    status = status_of(error)
    reference = _logged(error) if status >= HTTPStatus.INTERNAL_SERVER_ERROR else ""
    return answer(status, faults=error.faults, reference=reference)


def _forged(_error: CSRFError) -> Response:
    return answer(
        400,
        explanation="The form did not carry the mark of this site, or its mark has run out. Nothing was changed. "
        "Go back, load the page again, and send the form once more.",
    )


def _http_error(error: HTTPException) -> Response:
    if error.code is None or error.code < HTTPStatus.BAD_REQUEST:
        # A redirect that the router asks for, such as a missing slash at the end.
        return error.get_response(request.environ)
    if error.code == HTTPStatus.REQUEST_ENTITY_TOO_LARGE:
        return answer(413, explanation=_too_large())
    reference = _logged(error) if error.code >= HTTPStatus.INTERNAL_SERVER_ERROR else ""
    response = answer(error.code, explanation=EXPLANATION_OF.get(error.code, ""), reference=reference)
    for name, value in error.get_headers():
        if name in ("Allow", "Retry-After"):
            response.headers[name] = value
    return response


def _too_large() -> str:
    limit = request.max_content_length or current_app.config["MAX_CONTENT_LENGTH"]
    return f"This address takes up to {limit / 1_000_000:.0f} MB. Nothing was changed. Send less at once."


def _unexpected(error: Exception) -> Response:
    return answer(500, reference=_logged(error))


def _logged(error: Exception) -> str:
    """Write an error to the log under an id, which is all that a page shows of it."""
    reference = secrets.token_hex(4)
    current_app.logger.error("error %s at %s %s", reference, request.method, request.path, exc_info=error)
    return reference


def answer(status: int, *, faults: Sequence[Fault] = (), explanation: str = "", reference: str = "") -> Response:
    """Answer with an error page, or with problem details (RFC 9457) when JSON was asked for."""
    heading = HEADING_OF.get(status, HTTPStatus(status).phrase)
    # What goes wrong inside is told by its id alone: the faults may hold what nobody outside should read.
    told = () if reference and status == HTTPStatus.INTERNAL_SERVER_ERROR else tuple(faults)
    if wants_json():
        return _problem(status, heading, told, explanation=explanation, reference=reference)
    page = ErrorPage(
        heading=heading,
        faults=told,
        explanation=explanation,
        reference=reference,
        offer_sign_in=status == HTTPStatus.UNAUTHORIZED,
        kept=_kept_form() if status == HTTPStatus.UNAUTHORIZED else None,
    )
    return render_page(page, status=status)


def _kept_form() -> KeptForm | None:
    """Keep what was typed, so that it can be sent again after signing in; a file cannot be kept."""
    if request.method != "POST" or request.files:
        return None
    typed = tuple((name, value) for name, value in request.form.items(multi=True) if name != "csrf_token")
    return KeptForm(request.full_path.rstrip("?"), typed)


def _problem(status: int, heading: str, faults: Sequence[Fault], *, explanation: str, reference: str) -> Response:
    problem: dict[str, object] = {"type": "about:blank", "title": heading, "status": status}
    detail = explanation or "\n".join(str(fault) for fault in faults)
    if detail:
        problem["detail"] = detail
    if faults:
        problem["faults"] = [
            {"where": fault.where, "given": fault.given, "accepted": fault.accepted, "field": fault.field}
            for fault in faults
        ]
    if reference:
        problem["reference"] = reference
    return Response(json.dumps(problem), status=status, mimetype="application/problem+json")
