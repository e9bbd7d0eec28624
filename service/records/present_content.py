"""The content of a submission that is signed now: as submitted, or as recomputed after the last change."""

from __future__ import annotations

from dataclasses import dataclass
from typing import cast

from sqlalchemy import bindparam, select
from sqlalchemy.orm import Session

from service.analysis.results import Verdict
from service.records import states
from service.records.content import SignedContent, SignedGainsInForce, read_content
from service.records.tables.changes import SubmissionContent
from service.records.tables.submissions import Submission

_LAST_AGAIN = (
    select(SubmissionContent)
    .where(SubmissionContent.submission_id == bindparam("submission_id"))
    .order_by(SubmissionContent.version.desc())
    .limit(1)
)


@dataclass(frozen=True, kw_only=True, slots=True)
class PresentContent:
    """What is signed of a submission, with its exact bytes."""

    version: int
    """1: as it was submitted."""
    kept: bytes
    digest: str
    verdict: Verdict | None
    first_recomputation: int
    """Ordinal of the first of its recomputations, curves included."""

    def read(self) -> SignedContent:
        """Read the content."""
        return read_content(self.kept)


def present(session: Session, submission: Submission) -> PresentContent:
    """Return the content of a submission that is signed now."""
    again = session.execute(_LAST_AGAIN, {"submission_id": submission.id}).scalar_one_or_none()
    row = submission if again is None else again
    return PresentContent(
        version=1 if again is None else again.version,
        kept=row.content,
        digest=row.content_digest,
        verdict=cast(Verdict | None, row.verdict),
        first_recomputation=0 if again is None else again.first_recomputation,
    )


def gains_in_force(session: Session, loop_id: str) -> SignedGainsInForce | None:
    """Return the gains that run in a loop's controller, as they become a part of what is signed."""
    running = states.running(session, loop_id)
    if running is None:
        return None
    found = present(session, session.get_one(Submission, running.submission_id))
    return SignedGainsInForce(
        submission_id=running.submission_id,
        content_digest=found.digest,
        gain_sets=found.read().gain_sets,
    )
