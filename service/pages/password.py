"""One's own password: changed with the present one, after which one signs in again."""

from __future__ import annotations

from flask import Blueprint, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from service.pages import forms, visits
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.records import accounts, passwords
from service.records.errors import FieldErrors, SigningRefused, TooManyAttempts

WRONG = Problem("This is not your present password. Nothing was changed.", "present_password")
UNLIKE = Problem("The two are not the same. Type the new password twice.", "again")


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/password", "password", password, methods=["GET", "POST"])


def password() -> AnyResponse:
    """Ask for the present and the new password; once it is changed, every session of the account is over."""
    if request.method == "GET":
        return _form_page(())
    present, new = forms.secret("present_password"), forms.secret("new_password")
    if new != forms.secret("again"):
        return _form_page((UNLIKE,), 422)
    try:
        with visits.writing() as visit:
            accounts.change_password(visit.session, visit.actor, present, new, visit.now)
    except SigningRefused as refusal:
        with visits.writing() as visit:
            accounts.record_refused_password(visit.session, visit.actor, refusal, visit.now)
        return _form_page((WRONG,), 403)
    except TooManyAttempts as refusal:
        return _form_page((Problem(forms.sentence(refusal.detail), "present_password"),), 429)
    except FieldErrors as refusal:
        problems = (Problem(forms.sentence(error.detail), "new_password") for error in refusal.errors)
        return _form_page(tuple(problems), 422)
    response = redirect(url_for("pages.sign_in", changed="yes"), 303)
    visits.end(response)
    return response


def _form_page(problems: tuple[Problem, ...], status: int = 200) -> AnyResponse:
    # what is typed here is all secret, so that nothing is kept
    return page(
        "password.html",
        status,
        form=Form(problems=problems),
        account=visits.signed_in().actor.name,
        characters_min=passwords.CHARACTERS_MIN,
        characters_max=passwords.CHARACTERS_MAX,
    )
