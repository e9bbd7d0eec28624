"""What was made at a decision and is kept with it: the sheet, as its bytes, and the history's checkpoint."""

from __future__ import annotations

from datetime import datetime
from hashlib import sha256

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.records import history, kept_checkpoints, loops, visibility
from service.records.errors import NotFound
from service.records.roles import Actor
from service.records.tables.checkpoints import DecisionCheckpoint
from service.records.tables.submissions import Decision, Sheet
from service.records.views import Checkpoint, EntryReference


def keep(
    session: Session,
    actor: Actor,
    decision_id: str,
    pdf: bytes,
    renderer: str,
    checkpoint: Checkpoint,
    now: datetime,
) -> EntryReference:
    """Keep the sheet and the checkpoint made at a decision, in the decision's own transaction.

    They have an entry of their own in the history, since both hold the digest of the decision's. Raises
    NotFound.
    """
    decision = session.get(Decision, decision_id)
    if decision is None:
        raise NotFound("there is no such decision")
    submission = visibility.submission(session, actor, decision.submission_id)
    digest = sha256(pdf).hexdigest()
    kept = DecisionCheckpoint(decision_id=decision_id, **kept_checkpoints.parts(checkpoint))
    sheet = Sheet(
        decision_id=decision_id,
        submission_id=submission.id,
        renderer=renderer,
        content=pdf,
        content_digest=digest,
    )
    return history.append(
        session,
        kind="sheet_kept",
        actor=actor,
        about=loops.about(*loops.present(session, submission.loop_id)),
        content={
            "submission_id": submission.id,
            "decision_id": decision_id,
            "renderer": renderer,
            "sheet_digest": digest,
            "checkpoint": checkpoint,
        },
        now=now,
        rows=(kept, sheet),
    )


def latest(session: Session, actor: Actor, submission_id: str) -> bytes:
    """Return the sheet made at the latest decision. Raises NotFound where none was kept."""
    submission = visibility.submission(session, actor, submission_id)
    query = select(Sheet).where(Sheet.submission_id == submission.id).order_by(Sheet.event_number.desc())
    row = session.execute(query.limit(1)).scalar_one_or_none()
    if row is None:
        raise NotFound("no sheet was kept with a decision on these gains")
    return row.content
