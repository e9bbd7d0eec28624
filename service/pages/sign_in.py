"""Signing in and out."""

from __future__ import annotations

import re

from flask import Blueprint, Response, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from service.context import note_account, services
from service.monitoring.metrics import SIGN_IN_FAILURES
from service.pages import forms, visits
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.records import sign_ins
from service.records.errors import NotAuthenticated, TooManyAttempts

_OWN_PATH = re.compile(r"/(?![/\\])[^\\\s\x00-\x1f\x7f]*")
"""A path on this very site; two slashes, or one and a backslash, would name another one."""

WRONG = Problem("The name and the password do not belong together, or the account is closed.")

_TOLD = {
    "left": "You are signed out.",
    "changed": "Your password is changed. Sign in with the new one.",
}
"""What stands in the address → what it says; anything else there says nothing."""


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    pages.add_url_rule("/sign-in", "sign_in", sign_in, methods=["GET", "POST"])
    pages.add_url_rule("/sign-out", "sign_out", sign_out, methods=["POST"])


def sign_in() -> AnyResponse:
    """Ask for name and password; a session begins with a new identifier."""
    if request.method == "GET":
        form = Form({"next": request.args.get("next", "")})
        return form_page(form, told=next((_TOLD[name] for name in _TOLD if name in request.args), ""))
    form = forms.posted()
    try:
        source = request.remote_addr or ""
        started = sign_ins.sign_in(services().database, form.typed("name"), forms.secret("password"), source)
    except TooManyAttempts as refusal:
        SIGN_IN_FAILURES.labels("too_soon").inc()
        return _too_many(form, refusal)
    except NotAuthenticated:
        SIGN_IN_FAILURES.labels("wrong").inc()
        return form_page(form.with_problems([WRONG]), status=401)
    note_account(started.actor.name)
    response = redirect(safe_path(form.typed("next")), 303)
    visits.begin(response, started)
    return response


def sign_out() -> AnyResponse:
    """End the session, here and in the store."""
    with visits.writing() as visit:
        sign_ins.sign_out(visit.session, visits.signed_in().id, visit.now)
    response = redirect(url_for("pages.sign_in", left="yes"), 303)
    visits.end(response)
    return response


def form_page(form: Form, *, status: int = 200, told: str = "", lost: Form | None = None) -> Response:
    """The sign-in form.

    `told`: what has just been done. `lost`: what was typed into another form while the session ended.
    """
    response = page("sign_in.html", status, form=form, told=told, lost=lost)
    if status == 401:
        response.headers["WWW-Authenticate"] = 'Form realm="gain sign-off"'
    visits.keep_visit(response)
    return response


def safe_path(path: str) -> str:
    """The path where it leads to a page of this site, else the first page."""
    return path if _OWN_PATH.fullmatch(path) else url_for("pages.home")


def _too_many(form: Form, refusal: TooManyAttempts) -> Response:
    minutes = -(-refusal.retry_after_s // 60)
    problem = Problem(
        f"Too many attempts failed. Wait {minutes} minute{'' if minutes == 1 else 's'}, then try again."
    )
    response = form_page(form.with_problems([problem]), status=429)
    response.headers["Retry-After"] = str(refusal.retry_after_s)
    return response
