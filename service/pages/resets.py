"""Passwords that one administrator reset, confirmed by a second one."""

from __future__ import annotations

from flask import Blueprint, Response, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from service.pages import forms, visits
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.records import accounts
from service.records import resets as records
from service.records.errors import FieldErrors

NO_REASON = Problem("Say how you made sure that the person asked for it.", "reason")


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    pages.add_url_rule("/resets", "resets", resets)
    pages.add_url_rule("/resets/<name>", "reset", reset, methods=["GET", "POST"])


def resets() -> Response:
    """Every reset that awaits a second administrator."""
    with visits.reading() as visit:
        waiting = records.awaiting(visit.session, visit.actor)
    return page("resets.html", waiting=waiting, confirmed=request.args.get("confirmed") == "yes")


def reset(name: str) -> AnyResponse:
    """One reset with who did it and why, and its confirmation."""
    if request.method == "GET":
        return _form_page(name, Form())
    form = forms.posted()
    if not form.typed("reason"):
        return _form_page(name, form.with_problems([NO_REASON]), 422)
    try:
        with visits.writing() as visit:
            accounts.confirm_reset(visit.session, visit.actor, name, form.typed("reason"), visit.now)
    except FieldErrors as refusal:
        problems = [Problem(forms.sentence(error.detail), "reason") for error in refusal.errors]
        return _form_page(name, form.with_problems(problems), 422)
    return redirect(url_for("pages.resets", confirmed="yes"), 303)


def _form_page(name: str, form: Form, status: int = 200) -> Response:
    with visits.reading() as visit:
        found = records.find(visit.session, visit.actor, name)
    return page("reset.html", status, reset=found, form=form)
