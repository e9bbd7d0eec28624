"""Gains as found and as left at the controller."""

from __future__ import annotations

from flask import Blueprint

from service.api import answers, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, changes
from service.documents.installations import InstallationRequest
from service.records import installations

blueprint = Blueprint("installations", __name__, url_prefix="/v1/submissions/<submission_id>/installations")


@blueprint.post("")
@changes(InstallationRequest, representations.Installation)
def install(call: Call, read: Reader[InstallationRequest], submission_id: str) -> Answer:
    """Record the gains as found and as left; other gains than those approved are recorded and said."""
    installations.check_may_install(call.session, call.actor, submission_id)
    made = installations.install(call.session, call.actor, submission_id, read(), call.now)
    shown = representations.Installation.of(made)
    return answers.document(shown, status=201, location=f"/v1/submissions/{submission_id}")
