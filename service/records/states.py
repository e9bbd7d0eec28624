"""The states that submissions came into, and which gains run in a loop's controller, as the kept rows say."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from functools import cache
from typing import cast

from sqlalchemy import ColumnElement, bindparam, select
from sqlalchemy.orm import Session, aliased

from service.records import lifecycle
from service.records.lifecycle import Action, Limits, State
from service.records.tables.columns import Base
from service.records.tables.submissions import GainsComingIntoForce, Submission, SubmissionState

SUBMITTED = "submit"
"""The action by which a submission came into its first state."""

# statements are made once: making one costs more than running it
_LATER = aliased(SubmissionState)
_NOT_LAST = select(_LATER.ordinal).where(
    _LATER.submission_id == SubmissionState.submission_id, _LATER.ordinal > SubmissionState.ordinal
)
_STORED = (
    select(SubmissionState)
    .where(SubmissionState.submission_id == bindparam("submission_id"))
    .order_by(SubmissionState.ordinal.desc())
    .limit(1)
)
_OF_LOOP = (
    select(Submission, SubmissionState)
    .join(SubmissionState, SubmissionState.submission_id == Submission.id)
    .where(Submission.loop_id == bindparam("loop_id"), ~_NOT_LAST.exists())
    .order_by(Submission.event_number)
)
_RUNNING = (
    select(GainsComingIntoForce)
    .where(GainsComingIntoForce.loop_id == bindparam("loop_id"))
    .order_by(GainsComingIntoForce.ordinal.desc())
    .limit(1)
)
_RUNS, _TAKEN = aliased(GainsComingIntoForce), aliased(GainsComingIntoForce)
_HAS_RUN = (
    select(GainsComingIntoForce.ordinal)
    .where(
        GainsComingIntoForce.loop_id == bindparam("loop_id"),
        GainsComingIntoForce.submission_id == bindparam("submission_id"),
    )
    .limit(1)
)


@dataclass(frozen=True, slots=True)
class Outcome:
    """The rows that a change of gains in force makes, and whose gains they take the place of."""

    rows: tuple[Base, ...]
    superseded: str | None


def stored(session: Session, submission_id: str) -> SubmissionState:
    """Return the last state that a submission came into."""
    return session.execute(_STORED, {"submission_id": submission_id}).scalar_one()


def as_read(session: Session, submission: Submission, now: datetime) -> State:
    """Return the state of a submission as it reads at `now`."""
    return read_state(stored(session, submission.id), submission, now)


def read_state(row: SubmissionState, submission: Submission, now: datetime) -> State:
    """Return what a stored state reads as at `now`."""
    return lifecycle.as_read(cast(State, row.state), limits_of(submission), now)


def is_overdue(row: SubmissionState, submission: Submission, due_at: datetime | None, now: datetime) -> bool:
    """Say whether a submission in this stored state is overdue at `now`."""
    return lifecycle.is_overdue(cast(State, row.state), limits_of(submission), due_at, now)


def limits_of(submission: Submission) -> Limits:
    """Return the times by which the clock changes how a submission reads."""
    return Limits(install_by=submission.install_by, temporary_until=submission.temporary_until)


def first(submission_id: str, state: State) -> SubmissionState:
    """Make the row of a submission's first state."""
    return SubmissionState(submission_id=submission_id, ordinal=1, action=SUBMITTED, state=state)


def next_row(session: Session, submission: Submission, action: Action, now: datetime) -> SubmissionState:
    """Make the row of the state that `action` leads to. Raises WrongStep where it leads nowhere."""
    last = stored(session, submission.id)
    step = lifecycle.step(read_state(last, submission, now), action)
    return SubmissionState(
        submission_id=submission.id, ordinal=last.ordinal + 1, action=action, state=step.target
    )


def of_loop(session: Session, loop_id: str, now: datetime) -> dict[str, State]:
    """Return the state of every submission of a loop as it reads at `now`, earliest first."""
    found = session.execute(_OF_LOOP, {"loop_id": loop_id})
    return {row.id: read_state(stored, row, now) for row, stored in found}


def running(session: Session, loop_id: str) -> GainsComingIntoForce | None:
    """Return what last came into force in a loop's controller."""
    return session.execute(_RUNNING, {"loop_id": loop_id}).scalar_one_or_none()


@cache
def runs() -> ColumnElement[bool]:
    """Return the condition that a selected submission's gains are those that run in the controller."""
    taken = select(_TAKEN.ordinal).where(_TAKEN.loop_id == _RUNS.loop_id, _TAKEN.ordinal > _RUNS.ordinal)
    mine = select(_RUNS.ordinal).where(_RUNS.submission_id == Submission.id, ~taken.exists())
    return mine.exists()


def coming_into_force(
    session: Session, loop_id: str, submission_id: str, since: datetime, now: datetime
) -> Outcome:
    """Make the rows by which a submission's gains come into force and those before it are superseded."""
    before = running(session, loop_id)
    if before is not None and before.submission_id == submission_id:
        return Outcome((), None)
    row = GainsComingIntoForce(
        loop_id=loop_id,
        ordinal=before.ordinal + 1 if before else 1,
        submission_id=submission_id,
        since=since,
    )
    if before is None:
        return Outcome((row,), None)
    earlier = session.get_one(Submission, before.submission_id)
    # what was rejected or revoked while it ran stays that
    if not lifecycle.allows(as_read(session, earlier, now), "supersede"):
        return Outcome((row,), earlier.id)
    return Outcome((row, next_row(session, earlier, "supersede", now)), earlier.id)


def has_run(session: Session, loop_id: str, submission_id: str) -> bool:
    """Say whether a submission's gains ever came into force in its loop's controller."""
    which = {"loop_id": loop_id, "submission_id": submission_id}
    return session.execute(_HAS_RUN, which).first() is not None
