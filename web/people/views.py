"""Signing in and out."""

from __future__ import annotations

from flask import Blueprint, redirect, request, session, url_for
from werkzeug.wrappers import Response

from registry.errors import SignInRefused
from registry.services.people import anybody_there, sign_in, sign_out
from web import shell
from web.forms import NO_FAULTS, Faults
from web.marks import public
from web.pages import render_page
from web.people.forms import SignInForm
from web.people.pages import SignInPage
from web.refusals import status_of
from web.security.gate import own_path
from web.security.sessions import forget, remember, token_of_request


def blueprint() -> Blueprint:
    """Make the blueprint."""
    made = Blueprint("people", __name__, template_folder="templates")
    made.add_url_rule("/sign-in", view_func=sign_in_form)
    made.add_url_rule("/sign-in", view_func=sign_in_try, methods=["POST"])
    made.add_url_rule("/sign-out", view_func=sign_out_now, methods=["POST"])
    return made


@public
def sign_in_form() -> Response:
    """Show the form, or go on when somebody is signed in already."""
    next_path = own_path(request.args.get("next"))
    if shell.visitor() is not None:
        return redirect(next_path, 303)
    return render_page(_page(SignInForm("", "", next_path), NO_FAULTS))


@public
def sign_in_try() -> Response:
    """Sign somebody in, or show the form again with what was typed."""
    form = SignInForm.read(request.form)
    used = shell.settings()
    try:
        signed_in = sign_in(
            shell.database(),
            address=form.address,
            password=form.password,
            now=shell.now(),
            hashing=used.hashing,
            hours=used.session_hours,
        )
    except SignInRefused as refusal:
        return render_page(_page(form, Faults.of(refusal)), status=status_of(refusal))
    response = redirect(form.next_path, 303)
    remember(response, signed_in)
    return response


def _page(form: SignInForm, faults: Faults) -> SignInPage:
    return SignInPage(
        address=form.address, next_path=form.next_path, faults=faults, anybody_there=anybody_there(shell.database())
    )


def sign_out_now() -> Response:
    """End the session here and in the browser."""
    sign_out(shell.database(), token_of_request())
    response = redirect(url_for("people.sign_in_form"), 303)
    forget(response, session)
    return response
