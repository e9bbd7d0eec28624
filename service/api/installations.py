"""Gains as found and as left at the controller."""

from __future__ import annotations

from flask import Blueprint

from service.api import answers, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, changes_prepared
from service.documents.installations import InstallationRequest
from service.records import installations
from service.records.installations import PreparedInstallation

blueprint = Blueprint("installations", __name__, url_prefix="/v1/submissions/<submission_id>/installations")


def _recompute(call: Call, read: Reader[InstallationRequest], submission_id: str) -> PreparedInstallation:
    installations.check_may_install(call.session, call.actor, submission_id)
    return installations.prepare(call.session, call.actor, submission_id, read(), call.now)


@blueprint.post("")
@changes_prepared(InstallationRequest, representations.Installation, _recompute)
def install(call: Call, prepared: PreparedInstallation, submission_id: str) -> Answer:
    """Record the gains as found and as left; other gains than those approved are said, and recomputed."""
    made = installations.install(call.session, call.actor, prepared, call.now)
    shown = representations.Installation.of(made)
    return answers.document(shown, status=201, location=f"/v1/submissions/{submission_id}")
