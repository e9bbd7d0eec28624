"""Signing: approve, reject, withdraw, revoke."""

from __future__ import annotations

from flask import Blueprint

from service.api import answers, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, Variables, changes
from service.context import services
from service.documents.decisions import DecisionRequest
from service.issuing import sheets
from service.records import decisions
from service.records.errors import NotIndependent, SigningRefused

blueprint = Blueprint("decisions", __name__, url_prefix="/v1/submissions/<submission_id>/decisions")


def _leave_trace(call: Call, refusal: SigningRefused | NotIndependent, path: Variables) -> None:
    decisions.record_refused_signing(call.session, call.actor, path["submission_id"], refusal, call.now)


@blueprint.post("")
@changes(DecisionRequest, representations.Decision, trace=_leave_trace)
def decide(call: Call, read: Reader[DecisionRequest], submission_id: str) -> Answer:
    """Sign a decision on exactly the content that was reviewed, with one's own password."""
    decisions.check_may_decide(call.session, call.actor, submission_id)
    made = sheets.sign(call.session, call.actor, submission_id, read(), call.now, services().signing_key)
    shown = representations.Decision.of(made)
    return answers.document(shown, status=201, location=f"/v1/submissions/{submission_id}")
