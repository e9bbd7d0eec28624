"""What the store adds up to, as plain counts: for whoever watches the service, not for people's work.

Nothing in it names a loop, an account or an area.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session, aliased

from service.records import history, lifecycle
from service.records.tables.submissions import Submission, SubmissionState

NO_MODEL = "no_model"
"""In the place of a verdict, where the loop had no model to compute one from."""

_LATER = aliased(SubmissionState)


@dataclass(frozen=True, kw_only=True, slots=True)
class Standing:
    """Counts at one moment."""

    entries: int
    """Entries in the history."""
    last_entry_at: datetime | None
    submissions: Mapping[str, int]
    """How many were submitted, by the verdict that they were submitted with, or NO_MODEL."""
    overdue_emergency_reviews: int
    """Emergency changes whose review is still owed past `lifecycle.EMERGENCY_REVIEW_WITHIN`."""


def standing(session: Session, now: datetime) -> Standing:
    """Count. Reads only."""
    head = history.head(session)
    by_verdict = session.execute(select(Submission.verdict, func.count()).group_by(Submission.verdict))
    return Standing(
        entries=head.size,
        last_entry_at=head.time,
        submissions={verdict or NO_MODEL: number for verdict, number in by_verdict},
        overdue_emergency_reviews=_overdue_emergency_reviews(session, now),
    )


def _overdue_emergency_reviews(session: Session, now: datetime) -> int:
    later = select(_LATER.ordinal).where(
        _LATER.submission_id == SubmissionState.submission_id, _LATER.ordinal > SubmissionState.ordinal
    )
    query = (
        select(func.count())
        .select_from(Submission)
        .join(SubmissionState, SubmissionState.submission_id == Submission.id)
        .where(
            Submission.kind == "emergency",
            Submission.submitted_at < now - lifecycle.EMERGENCY_REVIEW_WITHIN,
            SubmissionState.state.in_(sorted(lifecycle.REVIEW_OWED)),
            ~later.exists(),
        )
    )
    return session.execute(query).scalar_one()
