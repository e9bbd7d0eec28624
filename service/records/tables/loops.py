"""Loops, their revisions and their models. Kept."""

from __future__ import annotations

from sqlalchemy import CheckConstraint, ForeignKey, String, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.records.tables.columns import Base, DigestText, Identifier, Kept


class Loop(Kept, Base):
    """A loop's identity: site and tag as typed, and as they are matched, without regard to case."""

    __tablename__ = "loops"
    __table_args__ = (UniqueConstraint("site_key", "tag_key"),)

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    site: Mapped[str]
    tag: Mapped[str]
    site_key: Mapped[str] = mapped_column(String(200))
    tag_key: Mapped[str] = mapped_column(String(200))


class LoopRevision(Kept, Base):
    """A loop as it was from this revision on."""

    __tablename__ = "loop_revisions"
    __table_args__ = (CheckConstraint("revision >= 1", name="revision_from_one"),)

    loop_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loops.id"), primary_key=True)
    revision: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    area: Mapped[str] = mapped_column(String(200), index=True)
    description: Mapped[str]
    safety_related: Mapped[bool]
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)


class LoopModel(Kept, Base):
    """A model version of a loop for one operating point."""

    __tablename__ = "loop_models"
    __table_args__ = (
        UniqueConstraint("loop_id", "version"),
        CheckConstraint("version >= 1", name="version_from_one"),
    )

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    loop_id: Mapped[str] = mapped_column(Identifier, ForeignKey("loops.id"))
    version: Mapped[int]
    operating_point: Mapped[str]
    operating_point_key: Mapped[str] = mapped_column(String(400))
    retired: Mapped[bool]
    """True: from this version on the operating point has no model in force."""
    content: Mapped[bytes]
    content_digest: Mapped[str] = mapped_column(DigestText)
