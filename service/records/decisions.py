"""Decisions and their signatures: approve, reject, withdraw, revoke. Each is final."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy.orm import Session

from service.documents.decisions import DecisionRequest
from service.records.errors import NotIndependent, SigningRefused
from service.records.roles import Actor
from service.records.views import DecisionView


def check_may_decide(session: Session, actor: Actor, submission_id: str) -> None:
    """Raise NotFound or NotAllowed before the document is read: no such submission, no role that decides."""
    raise NotImplementedError


def decide(
    session: Session, actor: Actor, submission_id: str, request: DecisionRequest, now: datetime
) -> DecisionView:
    """Sign a decision on exactly the content that was reviewed.

    Raises, in this order: NotFound; NotAllowed (NotIndependent, and SigningRefused for the password, leave a
    trace: the caller rolls back and calls `record_refused_signing` in a transaction of its own); FieldErrors
    (MissingDeviation); StaleContent (another digest); Conflict (WrongStep, BasisChanged, NotApprovable).
    """
    raise NotImplementedError


def record_refused_signing(
    session: Session,
    actor: Actor,
    submission_id: str,
    refusal: SigningRefused | NotIndependent,
    now: datetime,
) -> None:
    """Leave the trace of a signing that was refused, and count a wrong password.

    In a transaction of its own.
    """
    raise NotImplementedError
