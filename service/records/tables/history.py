"""The history: one entry a change, and the head that says how far it reaches."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, Index, String
from sqlalchemy.orm import Mapped, mapped_column

from service.records.tables.columns import Base, DigestText, Identifier, Number


class HistoryEvent(Base):
    """One entry. `canonical` is what was written; the other columns repeat parts of it to be searched by."""

    __tablename__ = "history_events"
    __table_args__ = (
        CheckConstraint("number >= 1", name="number_from_one"),
        Index("ix_history_events_loop_id_number", "loop_id", "number"),
        Index("ix_history_events_area_number", "area", "number"),
    )

    number: Mapped[int] = mapped_column(Number, primary_key=True, autoincrement=False)
    time: Mapped[datetime] = mapped_column(index=True)
    kind: Mapped[str] = mapped_column(String(40), index=True)
    actor: Mapped[str] = mapped_column(String(200), index=True)
    loop_id: Mapped[str | None] = mapped_column(Identifier)
    site: Mapped[str | None]
    tag: Mapped[str | None]
    area: Mapped[str | None]
    canonical: Mapped[bytes]
    previous: Mapped[str] = mapped_column(DigestText, unique=True)
    digest: Mapped[str] = mapped_column(DigestText, unique=True)


class HistoryHead(Base):
    """One row: how many entries there are, the last digest, and the Merkle tree's right edge."""

    __tablename__ = "history_head"
    __table_args__ = (CheckConstraint("id = 1", name="one_row"),)

    id: Mapped[int] = mapped_column(Number, primary_key=True, autoincrement=False)
    size: Mapped[int] = mapped_column(Number)
    digest: Mapped[str] = mapped_column(DigestText)
    time: Mapped[datetime | None]
    right_edge: Mapped[bytes]
    """Roots of the perfect subtrees that the entries form, largest first, 32 bytes each."""
