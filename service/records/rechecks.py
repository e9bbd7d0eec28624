"""Gains that were approved on what has been changed since: they are due for a recheck.

A mark is kept for good. It counts while the gains run or may be installed, so that the way out of it is to
submit them again: recomputed on what holds now, approved, and installed in the place of the old ones.
"""

from __future__ import annotations

from sqlalchemy import ColumnElement, and_, bindparam, or_, select
from sqlalchemy.orm import Session

from service.records import lifecycle, loops, states
from service.records.content import read_change
from service.records.lifecycle import State
from service.records.tables.changes import LoopChange, RecheckDue
from service.records.tables.submissions import Submission
from service.records.views import RecheckView

_LAST_MARK = (
    select(LoopChange, RecheckDue.event_number)
    .join(RecheckDue, RecheckDue.change_id == LoopChange.id)
    .where(RecheckDue.submission_id == bindparam("submission_id"))
    .order_by(RecheckDue.event_number.desc())
    .limit(1)
)


def due(session: Session, submission: Submission, state: State) -> RecheckView | None:
    """Return the last change that makes a submission, which reads as `state`, due for a recheck."""
    running = states.running(session, submission.loop_id)
    runs = running is not None and running.submission_id == submission.id
    if not runs and state not in lifecycle.APPROVED_TO_RUN:
        return None
    found = session.execute(_LAST_MARK, {"submission_id": submission.id}).one_or_none()
    if found is None:
        return None
    change, event_number = found
    content = read_change(change.content)
    return RecheckView(
        change_id=change.id,
        sentences=tuple(reason.sentence for reason in content.needs_second_person),
        entry=loops.written_by(session, event_number)[1],
    )


def is_due(state: ColumnElement[str]) -> ColumnElement[bool]:
    """Return the condition that a selected submission, which reads as `state`, is due for a recheck."""
    mark = select(RecheckDue.change_id).where(RecheckDue.submission_id == Submission.id)
    return and_(mark.exists(), or_(states.runs(), state.in_(sorted(lifecycle.APPROVED_TO_RUN))))


def rows(
    session: Session, loop_id: str, change_id: str, reads_as: dict[str, State]
) -> tuple[RecheckDue, ...]:
    """Make the marks of a change: on the gains in force, and on approved ones that are to be installed.

    `reads_as` is the state of each submission of the loop. What awaits its review is recomputed in place of
    being marked.
    """
    running = states.running(session, loop_id)
    runs = running.submission_id if running else None
    return tuple(
        RecheckDue(change_id=change_id, submission_id=submission_id)
        for submission_id, state in reads_as.items()
        if state in lifecycle.APPROVED_TO_RUN
        or (submission_id == runs and state not in lifecycle.REVIEW_OWED)
    )
