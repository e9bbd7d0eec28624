"""Deciding and signing: the decision is read back with all that it covers, then the password signs it."""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from typing import Annotated, Literal

from annotated_types import Len
from flask import Blueprint, Response, redirect, request, url_for
from werkzeug.exceptions import NotFound as NoSuchPage
from werkzeug.wrappers import Response as AnyResponse

from service.context import services
from service.documents import limits, reading, writing
from service.documents.decisions import DecisionRequest, Deviation, Digest
from service.documents.errors import FieldProblem, InvalidDocument
from service.documents.strict_json import Plain
from service.documents.texts import Prose
from service.issuing import sheets
from service.pages import forms, visits
from service.pages.dossier import dossier
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.standing import DEVIATION, check_open, missing_deviations
from service.pages.submissions import submission_page
from service.records import decisions as records
from service.records import queries
from service.records.errors import (
    FieldErrors,
    NotIndependent,
    SigningRefused,
    StaleContent,
    TooManyAttempts,
    WrongPassword,
)

TAKING_BACK = {"withdraw": "Withdraw these gains", "revoke": "Revoke the approval"}
HAS_CHANGED = Problem(
    "What you read is not the present content any more. Read it again below; what you typed is kept."
)


@dataclass(frozen=True, kw_only=True, slots=True)
class Reviewed:
    """A decision as it is about to be signed: all of a DecisionRequest but the password."""

    decision: Literal["approve", "reject", "withdraw", "revoke"]
    reason: Prose
    content_digest: Digest
    deviation: Annotated[tuple[Deviation, ...], Len(0, limits.DEVIATIONS_MAX)] = ()


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    one = "/submissions/<submission_id>"
    pages.add_url_rule(f"{one}/<any(withdraw, revoke):step>", "take_back", take_back)
    pages.add_url_rule(f"{one}/confirm", "confirm", confirm, methods=["GET", "POST"])
    pages.add_url_rule(f"{one}/sign", "sign", sign, methods=["GET", "POST"])
    pages.add_url_rule(f"{one}/signed/<decision_id>", "signed", signed)


def take_back(submission_id: str, step: str) -> Response:
    """Ask for the reason to withdraw or to revoke."""
    return _take_back_page(submission_id, Form({"decision": step}))


def confirm(submission_id: str) -> AnyResponse:
    """Read the decision back before it is signed; or go back to it with everything that was typed."""
    if request.method == "GET":
        return redirect(url_for("pages.submission", submission_id=submission_id))
    form = forms.posted()
    if form.typed("change"):
        return _decision_page(submission_id, form)
    try:
        reviewed = _reviewed(form)
    except InvalidDocument as refusal:
        return _decision_page(submission_id, _told(form, refusal.errors), 422)
    return _confirm_page(submission_id, form, reviewed)


def sign(submission_id: str) -> AnyResponse:
    """Sign with the password what was read back."""
    if request.method == "GET":
        return redirect(url_for("pages.submission", submission_id=submission_id))
    form = forms.posted()
    password = forms.secret("password")
    try:
        reviewed = _reviewed(form)
        if not 0 < len(password) <= limits.PASSWORD_CHARACTERS_MAX:
            return _confirm_page(
                submission_id, form, reviewed, 422, Problem("Type your password to sign.", "password")
            )
        decision_id = _sign(submission_id, _request(reviewed, password))
    except WrongPassword:
        problem = Problem("The password is wrong. Nothing was signed.", "password")
        return _confirm_page(submission_id, form, reviewed, 403, problem)
    except TooManyAttempts as refusal:
        problem = Problem(f"{forms.sentence(refusal.detail)} Nothing was signed.", "password")
        return _confirm_page(submission_id, form, reviewed, 429, problem)
    except (InvalidDocument, FieldErrors) as refusal:
        return _decision_page(submission_id, _told(form, refusal.errors), 422)
    except StaleContent:
        return _decision_page(submission_id, form.with_problems([HAS_CHANGED]), 412)
    return redirect(url_for("pages.signed", submission_id=submission_id, decision_id=decision_id), 303)


def signed(submission_id: str, decision_id: str) -> Response:
    """What was signed, and what follows."""
    with visits.reading() as visit:
        view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
    made = next((each for each in view.decisions if each.decision.decision_id == decision_id), None)
    if made is None:
        raise NoSuchPage
    return page("signed.html", view=view, made=made, entry=made.entry, checkpoint=made.checkpoint)


def _sign(submission_id: str, request_: DecisionRequest) -> str:
    """Sign, and return the decision's identifier; a refused signature leaves its trace after the rollback."""
    try:
        with visits.writing() as visit:
            key = services().signing_key
            made = sheets.sign(visit.session, visit.actor, submission_id, request_, visit.now, key)
            return made.decision.decision_id
    except (SigningRefused, NotIndependent) as refusal:
        with visits.writing() as visit:
            records.record_refused_signing(visit.session, visit.actor, submission_id, refusal, visit.now)
        raise


def _request(reviewed: Reviewed, password: str) -> DecisionRequest:
    return DecisionRequest(
        decision=reviewed.decision,
        reason=reviewed.reason,
        content_digest=reviewed.content_digest,
        deviation=reviewed.deviation,
        password=password,
    )


def _reviewed(form: Form) -> Reviewed:
    """The decision that stands in the form. Raises InvalidDocument."""
    plain: dict[str, Plain] = {
        name: form.typed(name) for name in ("decision", "reason", "content_digest") if form.typed(name)
    }
    if form.typed("decision") == "approve":
        plain["deviation"] = [
            {"criterion": name.removeprefix(DEVIATION), "reason": form.typed(name)}
            for name in _answered(form)
        ]
    return reading.read(Reviewed, plain)


def _answered(form: Form) -> list[str]:
    return [name for name, text in form.texts.items() if name.startswith(DEVIATION) and text]


def _told(form: Form, errors: tuple[FieldProblem, ...]) -> Form:
    """The form with what is wrong, each at its field and in words that fit it."""
    return form.with_problems(
        Problem(_MISSING.get(field, forms.sentence(error.detail)), field)
        if not form.typed(field)
        else Problem(forms.sentence(error.detail), field)
        for error in errors
        for field in [_field(error.pointer, form)]
    )


_MISSING = {
    "decision": "Choose to approve or to reject.",
    "reason": "Give the reason for your decision.",
    "password": "Type your password to sign.",
}


def _field(pointer: str, form: Form) -> str:
    """The field that a place in the decision stands in."""
    steps = pointer.split("/")[1:]
    if steps[:1] == ["deviation"]:
        answered = _answered(form)
        return answered[int(steps[1])] if len(steps) > 1 and int(steps[1]) < len(answered) else ""
    return steps[0] if steps and steps[0] in _MISSING else ""


def _decision_page(submission_id: str, form: Form, status: int = 200) -> Response:
    """The page on which the decision was typed."""
    if form.typed("decision") in TAKING_BACK:
        return _take_back_page(submission_id, form, status)
    return submission_page(submission_id, form, status)


def _take_back_page(submission_id: str, form: Form, status: int = 200) -> Response:
    step = form.typed("decision")
    with visits.reading() as visit:
        view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
        check_open(view, visit.actor, "revoke" if step == "revoke" else "withdraw")
    return page("take_back.html", status, view=view, form=form, step=step, heading=TAKING_BACK[step])


def _confirm_page(
    submission_id: str, form: Form, reviewed: Reviewed, status: int = 200, problem: Problem | None = None
) -> Response:
    with visits.reading() as visit:
        shown = dossier(visit, submission_id, with_figures=False)
        check_open(shown.view, visit.actor, reviewed.decision)
        content = queries.content_bytes(visit.session, visit.actor, submission_id)
    if reviewed.content_digest != shown.view.content_digest:
        return _decision_page(submission_id, form.with_problems([HAS_CHANGED]), 412)
    if reviewed.decision == "approve":
        missing = missing_deviations(shown.standing.deviations, form)
        if missing:
            return _decision_page(submission_id, form.with_problems(missing), 422)
    word_for_word = writing.to_bytes(json.loads(content), indent=2).decode()
    return page(
        "confirm.html",
        status,
        dossier=shown,
        view=shown.view,
        form=replace(form, problems=(problem,) if problem else ()),
        reviewed=reviewed,
        signer=visit.actor,
        meaning=records.MEANINGS[reviewed.decision],
        word_for_word=word_for_word,
    )
