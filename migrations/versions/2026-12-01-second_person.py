"""Changes that a second person confirms, and what follows from them for gains."""

from __future__ import annotations

from collections.abc import Iterable

import sqlalchemy as sa
from alembic import op

from service.records import guards

revision = "2026_12_01_second_person"
down_revision = "2026_12_01_first_tables"

NUMBER = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
TIME = sa.DateTime(timezone=True)
IDENTIFIER = sa.String(length=32)
DIGEST = sa.String(length=64)

KEPT: dict[str, tuple[guards.Key, ...]] = {
    "loop_changes": (("id",),),
    "loop_change_decisions": (("change_id",),),
    "submission_contents": (("submission_id", "version"),),
    "rechecks_due": (("change_id", "submission_id"),),
}
"""Kept tables with all their unique keys."""

ONE_OF_A_KIND = ("submission_id", "decided_by", "decision", "submission_digest")
"""A person signs a kind of decision once on one content: what was recomputed is approved anew."""

DECISION_KEYS: tuple[guards.Key, ...] = (("id",), ONE_OF_A_KIND, ("submission_id", "ordinal"))


def upgrade() -> None:
    """Go to this schema."""
    dialect = op.get_bind().dialect.name
    if dialect != "sqlite":
        _execute(guards.POSTGRESQL_CHANGE_FUNCTIONS)
    _make_changes()
    _make_consequences()
    for table, keys in KEPT.items():
        _execute(guards.append_only(dialect, table, *keys))
    _execute(guards.independent_confirmations(dialect))
    _let_a_recomputed_content_be_approved_anew(dialect)


def _execute(statements: Iterable[str]) -> None:
    for statement in statements:
        op.execute(statement)


def _let_a_recomputed_content_be_approved_anew(dialect: str) -> None:
    with op.batch_alter_table("decisions") as decisions:
        decisions.drop_constraint(op.f("uq_decisions_submission_id_decided_by_decision"), type_="unique")
        decisions.create_unique_constraint(
            op.f("uq_decisions_one_of_a_kind_on_a_content"), list(ONE_OF_A_KIND)
        )
    if dialect == "sqlite":
        # the table was made anew there, and its triggers went with the old one
        _execute(guards.append_only(dialect, "decisions", *DECISION_KEYS))
        _execute(guards.independent_decisions(dialect))


def _make_changes() -> None:
    """What is proposed, and what becomes of it."""
    op.create_table(
        "loop_changes",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("loop_id", IDENTIFIER, nullable=False),
        sa.Column("loop_revision", sa.Integer(), nullable=False),
        sa.Column("retires_model_id", IDENTIFIER, nullable=True),
        sa.Column("proposed_by", IDENTIFIER, nullable=False),
        sa.Column("proposed_at", TIME, nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_loop_changes_event_number")
        ),
        sa.ForeignKeyConstraint(["loop_id"], ["loops.id"], name=op.f("fk_loop_changes_loop_id")),
        sa.ForeignKeyConstraint(["proposed_by"], ["accounts.id"], name=op.f("fk_loop_changes_proposed_by")),
        sa.ForeignKeyConstraint(
            ["retires_model_id"], ["loop_models.id"], name=op.f("fk_loop_changes_retires_model_id")
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_loop_changes")),
    )
    op.create_index(op.f("ix_loop_changes_event_number"), "loop_changes", ["event_number"])
    op.create_index(op.f("ix_loop_changes_loop_id"), "loop_changes", ["loop_id"])
    op.create_table(
        "loop_change_decisions",
        sa.Column("change_id", IDENTIFIER, nullable=False),
        sa.Column("decision", sa.String(length=20), nullable=False),
        sa.Column("decided_by", IDENTIFIER, nullable=False),
        sa.Column("decided_at", TIME, nullable=False),
        sa.Column("change_digest", DIGEST, nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint(
            "decision IN ('confirm', 'reject', 'withdraw')", name=op.f("ck_loop_change_decisions_decision")
        ),
        sa.ForeignKeyConstraint(
            ["change_id"], ["loop_changes.id"], name=op.f("fk_loop_change_decisions_change_id")
        ),
        sa.ForeignKeyConstraint(
            ["decided_by"], ["accounts.id"], name=op.f("fk_loop_change_decisions_decided_by")
        ),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_loop_change_decisions_event_number")
        ),
        sa.PrimaryKeyConstraint("change_id", name=op.f("pk_loop_change_decisions")),
    )
    op.create_index(op.f("ix_loop_change_decisions_event_number"), "loop_change_decisions", ["event_number"])


def _make_consequences() -> None:
    """What a confirmed change leads to for gains that await review, and for those that were approved."""
    op.create_table(
        "submission_contents",
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("version", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("change_id", IDENTIFIER, nullable=False),
        sa.Column("first_recomputation", sa.Integer(), nullable=False),
        sa.Column("verdict", sa.String(length=20), nullable=True),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint("version >= 2", name=op.f("ck_submission_contents_version_after_the_first")),
        sa.CheckConstraint(
            "verdict IN ('stable', 'unstable', 'undecided')", name=op.f("ck_submission_contents_verdict")
        ),
        sa.ForeignKeyConstraint(
            ["change_id"], ["loop_changes.id"], name=op.f("fk_submission_contents_change_id")
        ),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_submission_contents_event_number")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_submission_contents_submission_id")
        ),
        sa.PrimaryKeyConstraint("submission_id", "version", name=op.f("pk_submission_contents")),
    )
    op.create_index(op.f("ix_submission_contents_event_number"), "submission_contents", ["event_number"])
    op.create_table(
        "rechecks_due",
        sa.Column("change_id", IDENTIFIER, nullable=False),
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(["change_id"], ["loop_changes.id"], name=op.f("fk_rechecks_due_change_id")),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_rechecks_due_event_number")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_rechecks_due_submission_id")
        ),
        sa.PrimaryKeyConstraint("change_id", "submission_id", name=op.f("pk_rechecks_due")),
    )
    op.create_index(op.f("ix_rechecks_due_event_number"), "rechecks_due", ["event_number"])
    op.create_index(op.f("ix_rechecks_due_submission_id"), "rechecks_due", ["submission_id"])
