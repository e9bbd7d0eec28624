"""Submissions and entries of the history as far as the areas of whoever asks reach."""

from __future__ import annotations

from functools import cache

from sqlalchemy import ColumnElement, Select, bindparam, select, true
from sqlalchemy.orm import Session

from service.records import loops
from service.records.errors import NotFound
from service.records.roles import Actor
from service.records.tables.loops import LoopRevision
from service.records.tables.submissions import Submission, SubmissionAuthor

_AUTHORS = select(SubmissionAuthor.account_id).where(
    SubmissionAuthor.submission_id == bindparam("submission_id")
)


def submission(session: Session, actor: Actor, submission_id: str) -> Submission:
    """Return a submission whose loop lies in the actor's areas now. Raises NotFound."""
    found = session.execute(_with_area(), {"submission_id": submission_id}).one_or_none()
    if found is None or not actor.sees(found[1]):
        raise NotFound("there is no such submission")
    return found[0]


@cache
def _with_area() -> Select[Submission, str]:
    """Select a submission with the present area of its loop."""
    return (
        select(Submission, LoopRevision.area)
        .join(LoopRevision, LoopRevision.loop_id == Submission.loop_id)
        .where(Submission.id == bindparam("submission_id"), loops.is_present())
    )


def authors(session: Session, submission_id: str) -> frozenset[str]:
    """Return the accounts of whoever submitted or prepared a submission."""
    return frozenset(session.execute(_AUTHORS, {"submission_id": submission_id}).scalars())


def in_sight(actor: Actor) -> ColumnElement[bool]:
    """Return the condition on a loop's present revision that keeps to the actor's areas."""
    return true() if actor.sees_every_area else LoopRevision.area.in_(sorted(actor.areas))
