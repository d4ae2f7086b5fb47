"""Reader links as their makers see them."""

from __future__ import annotations

import secrets

from flask import Blueprint, flash, redirect, request, url_for
from werkzeug.wrappers import Response

from registry.errors import InputRefused
from registry.services.reader_links import make_link, propose_link, revoke_link, series_links
from web import shell
from web.forms import NO_FAULTS, Faults, choices
from web.links.forms import LinkForm
from web.links.pages import LinksPage, MadeLinkPage, NewLinkPage
from web.pages import render_page
from web.reader.drawings import draw
from web.refusals import status_of

KINDS = choices(
    (
        ("fixed", "Fixed: the numbers stay as they are now"),
        ("live", "Live: the numbers follow the study"),
    )
)
TOKEN_BYTES = 24


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("links", __name__, template_folder="templates")
    base = "/series/<key:series_id>/links"
    made.add_url_rule(base, view_func=every)
    made.add_url_rule(f"{base}/new", view_func=new)
    made.add_url_rule(f"{base}/new", view_func=new_try, methods=["POST"])
    made.add_url_rule(f"{base}/<key:link_id>/revoke", view_func=revoked, methods=["POST"])
    return made


def every(series_id: int) -> Response:
    """List the reader links of a series."""
    return render_page(LinksPage(series_links(shell.database(), shell.person(), series_id, now=shell.now())))


def new(series_id: int) -> Response:
    """Show the form of a new link."""
    form = LinkForm.read(request.args)
    proposal = propose_link(shell.database(), shell.person(), series_id, form.draft())
    return render_page(NewLinkPage(proposal, form, KINDS, NO_FAULTS))


def new_try(series_id: int) -> Response:
    """Make a link and show its address, this once."""
    form = LinkForm.read(request.form)
    database, person = shell.database(), shell.person()
    proposal = propose_link(database, person, series_id, form.draft())
    token = secrets.token_urlsafe(TOKEN_BYTES)
    try:
        make_link(database, person, series_id, form.draft(), token=token, draw=draw, now=shell.now())
    except InputRefused as refusal:
        return render_page(NewLinkPage(proposal, form, KINDS, Faults.of(refusal)), status=status_of(refusal))
    address = request.host_url.rstrip("/") + url_for("reader.page", token=token)
    return render_page(MadeLinkPage(proposal, address), status=201)


def revoked(series_id: int, link_id: int) -> Response:
    """Shut a link for good."""
    revoke_link(shell.database(), shell.person(), series_id, link_id, now=shell.now())
    flash("The link no longer opens.")
    return redirect(url_for("links.every", series_id=series_id), 303)
