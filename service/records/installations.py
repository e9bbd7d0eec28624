"""Gains as they were found and left at the controller, held against those that were approved."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy.orm import Session

from service.documents.installations import InstallationRequest
from service.records.roles import Actor
from service.records.views import InstallationView


def check_may_install(session: Session, actor: Actor, submission_id: str) -> None:
    """Raise NotFound or NotAllowed before the document is read."""
    raise NotImplementedError


def install(
    session: Session, actor: Actor, submission_id: str, request: InstallationRequest, now: datetime
) -> InstallationView:
    """Record an installation. As left equal to the approved gains, in any form, to 1e-9: they are in force.

    Else it is recorded with its differences and the state stays. Raises NotFound, NotAllowed, FieldErrors
    (installed in the future, or before the submission was made), WrongStep.
    """
    raise NotImplementedError
