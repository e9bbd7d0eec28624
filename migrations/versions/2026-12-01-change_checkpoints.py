"""The checkpoint of the history that is made with each decision on a change of a loop."""

from __future__ import annotations

import sqlalchemy as sa
from alembic import op

from service.records import guards

revision = "2026_12_01_change_checkpoints"
down_revision = "2026_12_01_checkpoints"

NUMBER = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
TIME = sa.DateTime(timezone=True)
IDENTIFIER = sa.String(length=32)
DIGEST = sa.String(length=64)


def upgrade() -> None:
    """Go to this schema."""
    op.create_table(
        "change_checkpoints",
        sa.Column("change_id", IDENTIFIER, nullable=False),
        sa.Column("origin", DIGEST, nullable=False),
        sa.Column("size", NUMBER, nullable=False),
        sa.Column("digest", DIGEST, nullable=False),
        sa.Column("head", DIGEST, nullable=False),
        sa.Column("time", TIME, nullable=False),
        sa.Column("public_key", sa.String(length=44), nullable=True),
        sa.Column("signature", sa.String(length=88), nullable=True),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint(
            "(public_key IS NULL) = (signature IS NULL)",
            name=op.f("ck_change_checkpoints_signed_with_a_key"),
        ),
        sa.ForeignKeyConstraint(
            ["change_id"],
            ["loop_change_decisions.change_id"],
            name=op.f("fk_change_checkpoints_change_id"),
        ),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_change_checkpoints_event_number")
        ),
        sa.PrimaryKeyConstraint("change_id", name=op.f("pk_change_checkpoints")),
    )
    op.create_index(op.f("ix_change_checkpoints_event_number"), "change_checkpoints", ["event_number"])
    for statement in guards.append_only(op.get_bind().dialect.name, "change_checkpoints", ("change_id",)):
        op.execute(statement)
