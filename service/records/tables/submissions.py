"""Submissions, what was recomputed for them, decisions, installations, and what they add up to. Kept."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, String, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.records.tables.columns import Base, DigestText, Identifier, Kept


class Submission(Kept, Base):
    """Gains submitted for a loop. `content` is what is signed; the other columns repeat parts of it."""

    __tablename__ = "submissions"
    __table_args__ = (
        CheckConstraint("kind IN ('planned', 'emergency', 'baseline', 'return')", name="kind"),
        CheckConstraint("verdict IN ('stable', 'unstable', 'undecided')", name="verdict"),
    )

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    loop_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loops.id"), index=True)
    loop_revision: Mapped[int]
    kind: Mapped[str] = mapped_column(String(20))
    reason: Mapped[str]
    submitted_by: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"))
    submitted_by_name: Mapped[str] = mapped_column(String(40))
    submitted_by_full_name: Mapped[str]
    submitted_at: Mapped[datetime]
    install_by: Mapped[datetime | None]
    temporary_until: Mapped[datetime | None]
    verdict: Mapped[str | None] = mapped_column(String(20))
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class SubmissionAuthor(Kept, Base):
    """Whoever submitted or prepared it; a trigger keeps them from approving or rejecting it."""

    __tablename__ = "submission_authors"

    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"), primary_key=True)
    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), primary_key=True)


class SubmissionRecomputation(Kept, Base):
    """One recomputation of a submission with the curves of its responses.

    Its results stand in what is signed.
    """

    __tablename__ = "submission_recomputations"
    __table_args__ = (CheckConstraint("verdict IN ('stable', 'unstable', 'undecided')", name="verdict"),)

    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"), primary_key=True)
    ordinal: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    model_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loop_models.id"))
    gain_set: Mapped[int]
    operating_point: Mapped[str]
    verdict: Mapped[str] = mapped_column(String(20))
    curves: Mapped[bytes | None]
    curves_digest: Mapped[str | None] = mapped_column(DigestText)


class SubmissionState(Kept, Base):
    """A state that a submission came into, and by which action.

    The last one is its state, the clock aside.
    """

    __tablename__ = "submission_states"

    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"), primary_key=True)
    ordinal: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    action: Mapped[str] = mapped_column(String(20))
    state: Mapped[str] = mapped_column(String(40), index=True)


class GainsComingIntoForce(Kept, Base):
    """That a submission's gains began to run in the loop's controller. The last of a loop is what runs."""

    __tablename__ = "gains_in_force"

    loop_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loops.id"), primary_key=True)
    ordinal: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"))
    since: Mapped[datetime]


class Decision(Kept, Base):
    """A signature."""

    __tablename__ = "decisions"
    __table_args__ = (
        UniqueConstraint("submission_id", "ordinal"),
        # the name that the columns would make is longer than PostgreSQL's 63 characters
        UniqueConstraint(
            "submission_id",
            "decided_by",
            "decision",
            "submission_digest",
            name="uq_decisions_one_of_a_kind_on_a_content",
        ),
        CheckConstraint("decision IN ('approve', 'reject', 'withdraw', 'revoke')", name="decision"),
    )

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"))
    ordinal: Mapped[int]
    decision: Mapped[str] = mapped_column(String(20))
    decided_by: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"))
    decided_at: Mapped[datetime]
    submission_digest: Mapped[str] = mapped_column(DigestText)
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class Installation(Kept, Base):
    """Gains typed into the controller."""

    __tablename__ = "installations"
    __table_args__ = (UniqueConstraint("submission_id", "ordinal"),)

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"))
    ordinal: Mapped[int]
    recorded_by: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"))
    recorded_at: Mapped[datetime]
    as_approved: Mapped[bool]
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class Sheet(Kept, Base):
    """The sheet of a submission as it was made at a decision."""

    __tablename__ = "sheets"

    decision_id: Mapped[str] = mapped_column(Identifier, ForeignKey("decisions.id"), primary_key=True)
    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"), index=True)
    renderer: Mapped[str] = mapped_column(String(80))
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)
