"""The checkpoints of the history that were made with decisions. Kept."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey
from sqlalchemy.orm import Mapped, declared_attr, mapped_column
from sqlalchemy.schema import SchemaItem

from service.records.tables.columns import Base, DigestText, Identifier, Kept, KeyText, Number, SignatureText


class KeptCheckpoint(Kept):
    """What such a row holds, whatever was decided; the decision's entry is the last that it covers."""

    @declared_attr.directive
    def __table_args__(cls) -> tuple[SchemaItem, ...]:
        """Make the constraint anew for each table."""
        return (CheckConstraint("(public_key IS NULL) = (signature IS NULL)", name="signed_with_a_key"),)

    origin: Mapped[str] = mapped_column(DigestText)
    size: Mapped[int] = mapped_column(Number)
    digest: Mapped[str] = mapped_column(DigestText)
    head: Mapped[str] = mapped_column(DigestText)
    time: Mapped[datetime]
    public_key: Mapped[str | None] = mapped_column(KeyText)
    signature: Mapped[str | None] = mapped_column(SignatureText)


class DecisionCheckpoint(KeptCheckpoint, Base):
    """The checkpoint that was made with a decision on gains."""

    __tablename__ = "checkpoints"

    decision_id: Mapped[str] = mapped_column(Identifier, ForeignKey("decisions.id"), primary_key=True)


class ChangeCheckpoint(KeptCheckpoint, Base):
    """The checkpoint that was made with the decision on a change of a loop."""

    __tablename__ = "change_checkpoints"

    change_id: Mapped[str] = mapped_column(
        Identifier, ForeignKey("loop_change_decisions.change_id"), primary_key=True
    )
