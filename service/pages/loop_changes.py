"""A proposed change of what approvals of a loop rest on: read whole, then decided and signed."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass, fields

from flask import Blueprint, Response, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from service.analysis.plant import Range
from service.context import services
from service.documents import limits, reading, writing
from service.documents.changes import ChangeDecisionRequest
from service.documents.errors import FieldProblem, InvalidDocument
from service.documents.loops import LoopReference, LoopRegistration
from service.documents.strict_json import Plain
from service.issuing import changes as issuing
from service.judgement.criteria import Criteria
from service.judgement.digits import as_entered
from service.judgement.wording import criterion_words
from service.pages import forms, visits
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.options import Option
from service.records import change_lifecycle
from service.records import change_queries as queries
from service.records import changes as records
from service.records.errors import (
    NotIndependent,
    SigningRefused,
    StaleContent,
    TooManyAttempts,
    WrongPassword,
)
from service.records.views import ChangeView
from service.sheets import plants
from service.sheets.controllers import NONE

CHOICES = (Option("confirm", "Confirm this change"), Option("reject", "Reject this change"))
HAS_CHANGED = Problem("What you read is not the present change. Read it again below; what you typed is kept.")

_NAMES = {
    "description": "Description",
    "area": "Area",
    "pv": "PV range",
    "output": "Output range",
    "service_class": "Service",
    "safety_related": "Safety related",
    "criteria": "Limits",
    "inner_loop": "Secondary loop of its cascade",
    "fail_position": "Fail position",
}
_MISSING = {
    "decision": "Choose to confirm or to reject.",
    "reason": "Give the reason for your decision.",
    "password": "Type your password to sign.",
}


@dataclass(frozen=True, slots=True)
class Line:
    """One field of a loop before and after."""

    name: str
    before: str
    after: str


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    pages.add_url_rule("/changes/<change_id>", "change", change)
    pages.add_url_rule("/changes/<change_id>/sign", "sign_change", sign, methods=["GET", "POST"])


def change(change_id: str) -> Response:
    """One change with what follows from it, and the decision where it is this person's."""
    return _page(change_id, Form())


def sign(change_id: str) -> AnyResponse:
    """Sign the decision with the password."""
    if request.method == "GET":
        return redirect(url_for("pages.change", change_id=change_id))
    form, password = forms.posted(), forms.secret("password")
    try:
        _sign(change_id, _request(form, password))
    except InvalidDocument as refusal:
        return _page(change_id, form.with_problems(_problems(form, refusal.errors)), 422)
    except WrongPassword:
        problem = Problem("The password is wrong. Nothing was signed.", "password")
        return _page(change_id, form.with_problems([problem]), 403)
    except TooManyAttempts as refusal:
        problem = Problem(f"{forms.sentence(refusal.detail)} Nothing was signed.", "password")
        return _page(change_id, form.with_problems([problem]), 429)
    except StaleContent:
        return _page(change_id, form.with_problems([HAS_CHANGED]), 412)
    return redirect(url_for("pages.change", change_id=change_id), 303)


def _sign(change_id: str, asked: ChangeDecisionRequest) -> None:
    """Sign; a refused signature leaves its trace after the rollback."""
    try:
        with visits.reading() as visit:
            prepared = records.prepare(visit.session, visit.actor, change_id, asked, visit.now)
        with visits.writing() as visit:
            key = services().signing_key
            issuing.sign(visit.session, visit.actor, change_id, prepared, visit.now, key)
    except (SigningRefused, NotIndependent) as refusal:
        with visits.writing() as visit:
            records.record_refused_signing(visit.session, visit.actor, change_id, refusal, visit.now)
        raise


def _request(form: Form, password: str) -> ChangeDecisionRequest:
    plain: dict[str, Plain] = {
        name: form.typed(name) for name in ("decision", "reason", "content_digest") if form.typed(name)
    }
    # one that is longer than any password is none, and is not repeated to its sender
    plain |= {"password": password} if 0 < len(password) <= limits.PASSWORD_CHARACTERS_MAX else {}
    return reading.read(ChangeDecisionRequest, plain)


def _problems(form: Form, errors: tuple[FieldProblem, ...]) -> Iterator[Problem]:
    for error in errors:
        field = error.pointer.strip("/")
        known = field if field in _MISSING else ""
        missing = _MISSING.get(field) if not form.typed(field) else None
        yield Problem(missing or forms.sentence(error.detail), known)


def _page(change_id: str, form: Form, status: int = 200) -> Response:
    with visits.reading() as visit:
        view = queries.find(visit.session, visit.actor, change_id)
        kept = queries.content_bytes(visit.session, visit.actor, change_id)
    retires = view.content.retires
    return page(
        "change.html",
        status,
        view=view,
        form=form,
        lines=tuple(_lines(view)),
        retired=plants.told(retires.model.plant_model) if retires else (),
        choices=CHOICES,
        overtaken=change_lifecycle.is_overtaken(view.state),
        signer=visit.actor,
        meanings=records.MEANINGS,
        word_for_word=writing.to_bytes(json.loads(kept), indent=2).decode(),
    )


def _lines(view: ChangeView) -> Iterator[Line]:
    before, after = view.content.before, view.content.after
    for field in fields(LoopRegistration):
        was, will = getattr(before, field.name), getattr(after or before, field.name)
        if was != will:
            yield Line(_NAMES.get(field.name, field.name), _told(was), _told(will))


def _told(value: object) -> str:
    match value:
        case None:
            return NONE
        case bool():
            return "yes" if value else "no"
        case Range():
            return f"{as_entered(value.low)} to {as_entered(value.high)} {value.unit}".strip()
        case LoopReference():
            return f"{value.tag} at {value.site}"
        case Criteria():
            named = ((field.name, getattr(value, field.name)) for field in fields(Criteria))
            return (
                "; ".join(criterion_words(name, limit) for name, limit in named if limit is not None) or NONE
            )
        case _:
            return str(value)
