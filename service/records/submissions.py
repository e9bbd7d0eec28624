"""Gains submitted for a loop: recomputed at every operating point in force, then kept whole with a digest."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from service.documents.submissions import SubmissionRequest
from service.records.roles import Actor
from service.records.views import SubmissionView


@dataclass(frozen=True, kw_only=True, slots=True)
class PreparedSubmission:
    """A submission with everything recomputed, ready to be kept. Its inside is the records' own."""

    request: SubmissionRequest


def check_may_submit(actor: Actor) -> None:
    """Raise NotAllowed unless the actor may submit gains."""
    raise NotImplementedError


def prepare(session: Session, actor: Actor, request: SubmissionRequest, now: datetime) -> PreparedSubmission:
    """Recompute what is submitted, at every operating point in force. Reads only.

    It is apart from `submit` so that a recomputation of seconds holds up no other writer. Raises NotFound (no
    such loop), NotAllowed, FieldErrors.
    """
    raise NotImplementedError


def submit(session: Session, actor: Actor, prepared: PreparedSubmission, now: datetime) -> SubmissionView:
    """Keep a prepared submission.

    Raises Conflict where the loop, its models or the gains in force changed meanwhile: prepare again.
    """
    raise NotImplementedError
