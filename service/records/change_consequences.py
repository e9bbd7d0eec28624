"""What follows from a confirmed change of a loop, as rows that are kept with its one entry of the history."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import datetime
from hashlib import sha256

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from service.analysis.errors import FieldError
from service.documents.canonical import canonical_bytes
from service.documents.writing import plain
from service.records import (
    approvability,
    basis,
    lifecycle,
    loops,
    present_content,
    rechecks,
    recomputing,
    states,
)
from service.records.content import LoopChangeContent, RecomputedAgain, SignedContent, SignedModel
from service.records.present_content import PresentContent
from service.records.recomputing import Recomputed
from service.records.tables.changes import SubmissionContent
from service.records.tables.columns import Base
from service.records.tables.loops import LoopModel, LoopRevision
from service.records.tables.submissions import Submission, SubmissionRecomputation


@dataclass(frozen=True, kw_only=True, slots=True)
class Again:
    """A submission that awaits review, recomputed on what the change makes of its loop."""

    submission_id: str
    content: SignedContent
    made: tuple[Recomputed, ...]
    failed: str
    """Why it could not be recomputed; empty where it was. Then its content stays, and nobody approves it."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Consequences:
    """The rows that a decision on a change makes, what the history tells of them, and the new revision."""

    rows: tuple[Base, ...]
    told: dict[str, object]
    revision: LoopRevision | None


def recomputed(session: Session, change: LoopChangeContent, now: datetime) -> tuple[Again, ...]:
    """Recompute what awaits review, on the loop and the models that the change leaves. Reads only."""
    retired = change.retires.id if change.retires else None
    models = tuple(model for model in basis.models_in_force(session, change.loop_id) if model.id != retired)
    return tuple(
        _recomputed(session, change, models, submission_id, present.read(), now)
        for submission_id, present in awaiting(session, change, now)
    )


def awaiting(
    session: Session, change: LoopChangeContent, now: datetime
) -> Iterator[tuple[str, PresentContent]]:
    """Yield the submissions of the change's loop whose review is owed, with what is signed of them."""
    for submission_id, state in states.of_loop(session, change.loop_id, now).items():
        if state in lifecycle.REVIEW_OWED:
            submission = session.get_one(Submission, submission_id)
            yield submission_id, present_content.present(session, submission)


def of_change(
    session: Session, change: LoopChangeContent, again: tuple[Again, ...], now: datetime
) -> Consequences:
    """Make everything that follows from a change that has just been confirmed."""
    marks = rechecks.rows(
        session, change.loop_id, change.change_id, states.of_loop(session, change.loop_id, now)
    )
    contents = [_rows_of(session, each, now) for each in again if not each.failed]
    itself = _revision(session, change) if change.after is not None else _retirement(session, change)
    told = itself.told | {
        "recheck_due": [mark.submission_id for mark in marks],
        "recomputed": [
            {
                "submission_id": row.submission_id,
                "content_digest": row.content_digest,
                "verdict": row.verdict,
            }
            for row, _ in contents
        ],
        "not_recomputed": [
            {"submission_id": each.submission_id, "reason": each.failed} for each in again if each.failed
        ],
    }
    rows = (*itself.rows, *marks, *(each for row, others in contents for each in (row, *others)))
    return Consequences(rows=rows, told=told, revision=itself.revision)


def _recomputed(
    session: Session,
    change: LoopChangeContent,
    models: tuple[SignedModel, ...],
    submission_id: str,
    content: SignedContent,
    now: datetime,
) -> Again:
    loop = change.after or change.before
    try:
        made = recomputing.everywhere(loop, content.gain_sets, models, content.claims)
    except FieldError as error:
        return Again(submission_id=submission_id, content=content, made=(), failed=error.detail)
    signed = tuple(each.signed for each in made)
    # an emergency change runs itself: what ran before it stays what it was
    runs = states.has_run(session, change.loop_id, submission_id)
    again = replace(
        content,
        loop_revision=change.loop_revision + (1 if change.after is not None else 0),
        loop=loop,
        models=models,
        criteria_source=recomputing.criteria_source(loop),
        criteria=approvability.worst_criteria(signed),
        recomputations=signed,
        gains_in_force=(
            content.gains_in_force if runs else present_content.gains_in_force(session, change.loop_id)
        ),
        recomputed_again=RecomputedAgain(change_id=change.change_id, recomputed_at=now),
    )
    return Again(submission_id=submission_id, content=again, made=made, failed="")


def _revision(session: Session, change: LoopChangeContent) -> Consequences:
    assert change.after is not None  # noqa: S101  asked by the caller
    revision = loops.next_revision(*loops.present(session, change.loop_id), change.after)
    told = {"revision": revision.revision, "before": change.before, "loop": change.after}
    return Consequences(rows=(revision,), told=told, revision=revision)


def _retirement(session: Session, change: LoopChangeContent) -> Consequences:
    assert change.retires is not None  # noqa: S101  a change has a loop or a model to retire
    made = loops.retirement(session, session.get_one(LoopModel, change.retires.id))
    told = {
        "model_id": made.id,
        "version": made.version,
        "operating_point": made.operating_point,
        "retires": change.retires.id,
    }
    return Consequences(rows=(made,), told=told, revision=None)


def _rows_of(
    session: Session, again: Again, now: datetime
) -> tuple[SubmissionContent, tuple[SubmissionRecomputation, ...]]:
    """Make the next version of a submission's content, and the rows of its recomputations."""
    submission = session.get_one(Submission, again.submission_id)
    query = select(func.count()).where(SubmissionRecomputation.submission_id == again.submission_id)
    first = session.execute(query).scalar_one()
    stated = again.content.recomputed_again
    assert stated is not None  # noqa: S101  stated by `_recomputed`
    content = replace(again.content, recomputed_again=replace(stated, recomputed_at=now))
    kept = canonical_bytes(plain(content))
    row = SubmissionContent(
        submission_id=again.submission_id,
        version=present_content.present(session, submission).version + 1,
        change_id=stated.change_id,
        first_recomputation=first,
        verdict=approvability.worst_verdict(content.recomputations),
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    return row, recomputing.rows(again.submission_id, first, again.made)
