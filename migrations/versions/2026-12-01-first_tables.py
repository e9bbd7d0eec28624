"""The first tables: the history, accounts, loops, submissions and what becomes of them."""

from __future__ import annotations

from collections.abc import Iterable

import sqlalchemy as sa
from alembic import op

from service.records import guards

revision = "2026_12_01_first_tables"
down_revision = None

NUMBER = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
TIME = sa.DateTime(timezone=True)
IDENTIFIER = sa.String(length=32)
DIGEST = sa.String(length=64)

BEFORE_THE_FIRST = "0" * 64
"""What the first entry of a history has in place of an earlier entry's digest."""

KEPT: dict[str, tuple[guards.Key, ...]] = {
    "history_events": (("number",), ("digest",), ("previous",)),
    "loops": (("id",), ("site_key", "tag_key")),
    "loop_revisions": (("loop_id", "revision"),),
    "loop_models": (("id",), ("loop_id", "version")),
    "submissions": (("id",),),
    "submission_authors": (("submission_id", "account_id"),),
    "submission_recomputations": (("submission_id", "ordinal"),),
    "submission_states": (("submission_id", "ordinal"),),
    "gains_in_force": (("loop_id", "ordinal"),),
    "decisions": (("id",), ("submission_id", "decided_by", "decision"), ("submission_id", "ordinal")),
    "installations": (("id",), ("submission_id", "ordinal")),
    "sheets": (("decision_id",),),
}
"""Kept tables with all their unique keys."""


def upgrade() -> None:
    """Go to this schema."""
    dialect = op.get_bind().dialect.name
    if dialect != "sqlite":
        _execute(guards.POSTGRESQL_FUNCTIONS)
    _make_history()
    _make_accounts()
    _make_loops()
    _make_submissions()
    _make_outcomes()
    for table, keys in KEPT.items():
        _execute(guards.append_only(dialect, table, *keys))
    _execute(guards.head_moves_by_one(dialect))
    _execute(guards.names_stay(dialect))
    _execute(guards.independent_decisions(dialect))


def _execute(statements: Iterable[str]) -> None:
    for statement in statements:
        op.execute(statement)


def _make_history() -> None:
    """The history and its head, which starts at nothing."""
    op.create_table(
        "history_events",
        sa.Column("number", NUMBER, autoincrement=False, nullable=False),
        sa.Column("time", TIME, nullable=False),
        sa.Column("kind", sa.String(length=40), nullable=False),
        sa.Column("actor", sa.String(length=200), nullable=False),
        sa.Column("loop_id", IDENTIFIER, nullable=True),
        sa.Column("site", sa.Text(), nullable=True),
        sa.Column("tag", sa.Text(), nullable=True),
        sa.Column("area", sa.Text(), nullable=True),
        sa.Column("canonical", sa.LargeBinary(), nullable=False),
        sa.Column("previous", DIGEST, nullable=False),
        sa.Column("digest", DIGEST, nullable=False),
        sa.CheckConstraint("number >= 1", name=op.f("ck_history_events_number_from_one")),
        sa.PrimaryKeyConstraint("number", name=op.f("pk_history_events")),
        sa.UniqueConstraint("digest", name=op.f("uq_history_events_digest")),
        sa.UniqueConstraint("previous", name=op.f("uq_history_events_previous")),
    )
    op.create_index(op.f("ix_history_events_actor"), "history_events", ["actor"])
    op.create_index("ix_history_events_area_number", "history_events", ["area", "number"])
    op.create_index(op.f("ix_history_events_kind"), "history_events", ["kind"])
    op.create_index("ix_history_events_loop_id_number", "history_events", ["loop_id", "number"])
    op.create_index(op.f("ix_history_events_time"), "history_events", ["time"])
    op.create_table(
        "history_head",
        sa.Column("id", NUMBER, autoincrement=False, nullable=False),
        sa.Column("size", NUMBER, nullable=False),
        sa.Column("digest", DIGEST, nullable=False),
        sa.Column("time", TIME, nullable=True),
        sa.Column("right_edge", sa.LargeBinary(), nullable=False),
        sa.CheckConstraint("id = 1", name=op.f("ck_history_head_one_row")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_history_head")),
    )
    head = sa.table(
        "history_head", sa.column("id"), sa.column("size"), sa.column("digest"), sa.column("right_edge")
    )
    op.execute(
        head.insert().values(
            id=1, size=0, digest=BEFORE_THE_FIRST, right_edge=sa.literal(b"", sa.LargeBinary())
        )
    )


def _make_accounts() -> None:
    """Working tables: who signs in, and by what."""
    op.create_table(
        "accounts",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("name", sa.String(length=40), nullable=False),
        sa.Column("full_name", sa.Text(), nullable=False),
        sa.Column("password_hash", sa.Text(), nullable=False),
        sa.Column("created_at", TIME, nullable=False),
        sa.Column("closed_at", TIME, nullable=True),
        sa.Column("last_used_at", TIME, nullable=True),
        sa.Column("reset_by", IDENTIFIER, nullable=True),
        sa.ForeignKeyConstraint(["reset_by"], ["accounts.id"], name=op.f("fk_accounts_reset_by")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_accounts")),
        sa.UniqueConstraint("name", name=op.f("uq_accounts_name")),
    )
    op.create_table(
        "account_roles",
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("role", sa.String(length=20), nullable=False),
        sa.CheckConstraint(
            "role IN ('submitter', 'reviewer', 'auditor', 'administrator')",
            name=op.f("ck_account_roles_role"),
        ),
        sa.ForeignKeyConstraint(["account_id"], ["accounts.id"], name=op.f("fk_account_roles_account_id")),
        sa.PrimaryKeyConstraint("account_id", "role", name=op.f("pk_account_roles")),
    )
    op.create_table(
        "account_areas",
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("area", sa.String(length=200), nullable=False),
        sa.ForeignKeyConstraint(["account_id"], ["accounts.id"], name=op.f("fk_account_areas_account_id")),
        sa.PrimaryKeyConstraint("account_id", "area", name=op.f("pk_account_areas")),
    )
    op.create_table(
        "tokens",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("secret_sha256", sa.LargeBinary(length=32), nullable=False),
        sa.Column("note", sa.Text(), nullable=False),
        sa.Column("issued_at", TIME, nullable=False),
        sa.Column("revoked_at", TIME, nullable=True),
        sa.Column("last_used_at", TIME, nullable=True),
        sa.ForeignKeyConstraint(["account_id"], ["accounts.id"], name=op.f("fk_tokens_account_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_tokens")),
    )
    op.create_index(op.f("ix_tokens_account_id"), "tokens", ["account_id"])
    op.create_table(
        "sign_in_sessions",
        sa.Column("id", DIGEST, nullable=False),
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("csrf_secret", sa.LargeBinary(length=32), nullable=False),
        sa.Column("started_at", TIME, nullable=False),
        sa.Column("last_used_at", TIME, nullable=False),
        sa.Column("ended_at", TIME, nullable=True),
        sa.ForeignKeyConstraint(["account_id"], ["accounts.id"], name=op.f("fk_sign_in_sessions_account_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_sign_in_sessions")),
    )
    op.create_index(op.f("ix_sign_in_sessions_account_id"), "sign_in_sessions", ["account_id"])
    op.create_table(
        "throttles",
        sa.Column("subject", sa.String(length=240), nullable=False),
        sa.Column("failures", sa.Integer(), nullable=False),
        sa.Column("last_failed_at", TIME, nullable=False),
        sa.Column("blocked_until", TIME, nullable=True),
        sa.PrimaryKeyConstraint("subject", name=op.f("pk_throttles")),
    )
    op.create_table(
        "idempotency_keys",
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("key", sa.String(length=200), nullable=False),
        sa.Column("fingerprint", DIGEST, nullable=False),
        sa.Column("status", sa.Integer(), nullable=False),
        sa.Column("location", sa.Text(), nullable=True),
        sa.Column("etag", sa.Text(), nullable=True),
        sa.Column("body", sa.LargeBinary(), nullable=False),
        sa.Column("created_at", TIME, nullable=False),
        sa.ForeignKeyConstraint(["account_id"], ["accounts.id"], name=op.f("fk_idempotency_keys_account_id")),
        sa.PrimaryKeyConstraint("account_id", "key", name=op.f("pk_idempotency_keys")),
    )


def _make_loops() -> None:
    """Loops, revisions, models."""
    op.create_table(
        "loops",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("tag", sa.Text(), nullable=False),
        sa.Column("site_key", sa.String(length=200), nullable=False),
        sa.Column("tag_key", sa.String(length=200), nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_loops_event_number")
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_loops")),
        sa.UniqueConstraint("site_key", "tag_key", name=op.f("uq_loops_site_key_tag_key")),
    )
    op.create_index(op.f("ix_loops_event_number"), "loops", ["event_number"])
    op.create_table(
        "loop_revisions",
        sa.Column("loop_id", IDENTIFIER, nullable=False),
        sa.Column("revision", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("area", sa.String(length=200), nullable=False),
        sa.Column("description", sa.Text(), nullable=False),
        sa.Column("safety_related", sa.Boolean(), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_loop_revisions_revision_from_one")),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_loop_revisions_event_number")
        ),
        sa.ForeignKeyConstraint(["loop_id"], ["loops.id"], name=op.f("fk_loop_revisions_loop_id")),
        sa.PrimaryKeyConstraint("loop_id", "revision", name=op.f("pk_loop_revisions")),
    )
    op.create_index(op.f("ix_loop_revisions_area"), "loop_revisions", ["area"])
    op.create_index(op.f("ix_loop_revisions_event_number"), "loop_revisions", ["event_number"])
    op.create_table(
        "loop_models",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("loop_id", IDENTIFIER, nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("operating_point", sa.Text(), nullable=False),
        sa.Column("operating_point_key", sa.String(length=400), nullable=False),
        sa.Column("retired", sa.Boolean(), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint("version >= 1", name=op.f("ck_loop_models_version_from_one")),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_loop_models_event_number")
        ),
        sa.ForeignKeyConstraint(["loop_id"], ["loops.id"], name=op.f("fk_loop_models_loop_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_loop_models")),
        sa.UniqueConstraint("loop_id", "version", name=op.f("uq_loop_models_loop_id_version")),
    )
    op.create_index(op.f("ix_loop_models_event_number"), "loop_models", ["event_number"])


def _make_submissions() -> None:
    """What is submitted, by whom, and what was recomputed for it."""
    op.create_table(
        "submissions",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("loop_id", IDENTIFIER, nullable=False),
        sa.Column("loop_revision", sa.Integer(), nullable=False),
        sa.Column("kind", sa.String(length=20), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("submitted_by", IDENTIFIER, nullable=False),
        sa.Column("submitted_by_name", sa.String(length=40), nullable=False),
        sa.Column("submitted_by_full_name", sa.Text(), nullable=False),
        sa.Column("submitted_at", TIME, nullable=False),
        sa.Column("install_by", TIME, nullable=True),
        sa.Column("temporary_until", TIME, nullable=True),
        sa.Column("verdict", sa.String(length=20), nullable=True),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint(
            "kind IN ('planned', 'emergency', 'baseline', 'return')", name=op.f("ck_submissions_kind")
        ),
        sa.CheckConstraint(
            "verdict IN ('stable', 'unstable', 'undecided')", name=op.f("ck_submissions_verdict")
        ),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_submissions_event_number")
        ),
        sa.ForeignKeyConstraint(["loop_id"], ["loops.id"], name=op.f("fk_submissions_loop_id")),
        sa.ForeignKeyConstraint(["submitted_by"], ["accounts.id"], name=op.f("fk_submissions_submitted_by")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_submissions")),
    )
    op.create_index(op.f("ix_submissions_event_number"), "submissions", ["event_number"])
    op.create_index(op.f("ix_submissions_loop_id"), "submissions", ["loop_id"])
    op.create_table(
        "submission_authors",
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("account_id", IDENTIFIER, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["account_id"], ["accounts.id"], name=op.f("fk_submission_authors_account_id")
        ),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_submission_authors_event_number")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_submission_authors_submission_id")
        ),
        sa.PrimaryKeyConstraint("submission_id", "account_id", name=op.f("pk_submission_authors")),
    )
    op.create_index(op.f("ix_submission_authors_event_number"), "submission_authors", ["event_number"])
    op.create_table(
        "submission_recomputations",
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("ordinal", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("model_id", IDENTIFIER, nullable=False),
        sa.Column("gain_set", sa.Integer(), nullable=False),
        sa.Column("operating_point", sa.Text(), nullable=False),
        sa.Column("verdict", sa.String(length=20), nullable=False),
        sa.Column("curves", sa.LargeBinary(), nullable=True),
        sa.Column("curves_digest", DIGEST, nullable=True),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint(
            "verdict IN ('stable', 'unstable', 'undecided')",
            name=op.f("ck_submission_recomputations_verdict"),
        ),
        sa.ForeignKeyConstraint(
            ["event_number"],
            ["history_events.number"],
            name=op.f("fk_submission_recomputations_event_number"),
        ),
        sa.ForeignKeyConstraint(
            ["model_id"], ["loop_models.id"], name=op.f("fk_submission_recomputations_model_id")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_submission_recomputations_submission_id")
        ),
        sa.PrimaryKeyConstraint("submission_id", "ordinal", name=op.f("pk_submission_recomputations")),
    )
    op.create_index(
        op.f("ix_submission_recomputations_event_number"), "submission_recomputations", ["event_number"]
    )


def _make_outcomes() -> None:
    """What becomes of it."""
    op.create_table(
        "submission_states",
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("ordinal", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("action", sa.String(length=20), nullable=False),
        sa.Column("state", sa.String(length=40), nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_submission_states_event_number")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_submission_states_submission_id")
        ),
        sa.PrimaryKeyConstraint("submission_id", "ordinal", name=op.f("pk_submission_states")),
    )
    op.create_index(op.f("ix_submission_states_event_number"), "submission_states", ["event_number"])
    op.create_index(op.f("ix_submission_states_state"), "submission_states", ["state"])
    op.create_table(
        "gains_in_force",
        sa.Column("loop_id", IDENTIFIER, nullable=False),
        sa.Column("ordinal", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("since", TIME, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_gains_in_force_event_number")
        ),
        sa.ForeignKeyConstraint(["loop_id"], ["loops.id"], name=op.f("fk_gains_in_force_loop_id")),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_gains_in_force_submission_id")
        ),
        sa.PrimaryKeyConstraint("loop_id", "ordinal", name=op.f("pk_gains_in_force")),
    )
    op.create_index(op.f("ix_gains_in_force_event_number"), "gains_in_force", ["event_number"])
    op.create_table(
        "decisions",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("ordinal", sa.Integer(), nullable=False),
        sa.Column("decision", sa.String(length=20), nullable=False),
        sa.Column("decided_by", IDENTIFIER, nullable=False),
        sa.Column("decided_at", TIME, nullable=False),
        sa.Column("submission_digest", DIGEST, nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.CheckConstraint(
            "decision IN ('approve', 'reject', 'withdraw', 'revoke')", name=op.f("ck_decisions_decision")
        ),
        sa.ForeignKeyConstraint(["decided_by"], ["accounts.id"], name=op.f("fk_decisions_decided_by")),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_decisions_event_number")
        ),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_decisions_submission_id")
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_decisions")),
        sa.UniqueConstraint(
            "submission_id",
            "decided_by",
            "decision",
            name=op.f("uq_decisions_submission_id_decided_by_decision"),
        ),
        sa.UniqueConstraint("submission_id", "ordinal", name=op.f("uq_decisions_submission_id_ordinal")),
    )
    op.create_index(op.f("ix_decisions_event_number"), "decisions", ["event_number"])
    op.create_table(
        "installations",
        sa.Column("id", IDENTIFIER, nullable=False),
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("ordinal", sa.Integer(), nullable=False),
        sa.Column("recorded_by", IDENTIFIER, nullable=False),
        sa.Column("recorded_at", TIME, nullable=False),
        sa.Column("as_approved", sa.Boolean(), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_installations_event_number")
        ),
        sa.ForeignKeyConstraint(["recorded_by"], ["accounts.id"], name=op.f("fk_installations_recorded_by")),
        sa.ForeignKeyConstraint(
            ["submission_id"], ["submissions.id"], name=op.f("fk_installations_submission_id")
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_installations")),
        sa.UniqueConstraint("submission_id", "ordinal", name=op.f("uq_installations_submission_id_ordinal")),
    )
    op.create_index(op.f("ix_installations_event_number"), "installations", ["event_number"])
    op.create_table(
        "sheets",
        sa.Column("decision_id", IDENTIFIER, nullable=False),
        sa.Column("submission_id", IDENTIFIER, nullable=False),
        sa.Column("renderer", sa.String(length=80), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("content_digest", DIGEST, nullable=False),
        sa.Column("event_number", NUMBER, nullable=False),
        sa.ForeignKeyConstraint(["decision_id"], ["decisions.id"], name=op.f("fk_sheets_decision_id")),
        sa.ForeignKeyConstraint(
            ["event_number"], ["history_events.number"], name=op.f("fk_sheets_event_number")
        ),
        sa.ForeignKeyConstraint(["submission_id"], ["submissions.id"], name=op.f("fk_sheets_submission_id")),
        sa.PrimaryKeyConstraint("decision_id", name=op.f("pk_sheets")),
    )
    op.create_index(op.f("ix_sheets_event_number"), "sheets", ["event_number"])
    op.create_index(op.f("ix_sheets_submission_id"), "sheets", ["submission_id"])
