"""Changes of what approvals rest on, who decided them, and what followed for gains. Kept."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, String
from sqlalchemy.orm import Mapped, mapped_column

from service.records.tables.columns import Base, DigestText, Identifier, Kept


class LoopChange(Kept, Base):
    """A change as it was proposed. `content` is what a second person signs."""

    __tablename__ = "loop_changes"

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    loop_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loops.id"), index=True)
    loop_revision: Mapped[int]
    retires_model_id: Mapped[str | None] = mapped_column(Identifier, ForeignKey("loop_models.id"))
    proposed_by: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"))
    proposed_at: Mapped[datetime]
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class LoopChangeDecision(Kept, Base):
    """What became of a change: one decision, which is final. A trigger keeps its author from deciding it."""

    __tablename__ = "loop_change_decisions"
    __table_args__ = (CheckConstraint("decision IN ('confirm', 'reject', 'withdraw')", name="decision"),)

    change_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loop_changes.id"), primary_key=True)
    decision: Mapped[str] = mapped_column(String(20))
    decided_by: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"))
    decided_at: Mapped[datetime]
    change_digest: Mapped[str] = mapped_column(DigestText)
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class SubmissionContent(Kept, Base):
    """The content of a submission recomputed after a change; the last one is what is signed from then on."""

    __tablename__ = "submission_contents"
    __table_args__ = (
        CheckConstraint("version >= 2", name="version_after_the_first"),
        CheckConstraint("verdict IN ('stable', 'unstable', 'undecided')", name="verdict"),
    )

    submission_id: Mapped[str] = mapped_column(Identifier, ForeignKey("submissions.id"), primary_key=True)
    version: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    change_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loop_changes.id"))
    first_recomputation: Mapped[int]
    """Ordinal of its first row in `submission_recomputations`."""
    verdict: Mapped[str | None] = mapped_column(String(20))
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class RecheckDue(Kept, Base):
    """That gains were approved on what a change has altered, so that they are due for a recheck."""

    __tablename__ = "rechecks_due"

    change_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loop_changes.id"), primary_key=True)
    submission_id: Mapped[str] = mapped_column(
        Identifier, ForeignKey("submissions.id"), primary_key=True, index=True
    )
