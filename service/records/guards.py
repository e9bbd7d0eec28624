"""Triggers that refuse what must not happen to kept tables.

Guards against accidents; the history is the proof.

Called by migrations, which never change what an earlier one made: what is here is only added to.
"""

from __future__ import annotations

from collections.abc import Iterator

Key = tuple[str, ...]
"""The columns of a primary key or of another unique constraint."""

POSTGRESQL_FUNCTIONS = (
    """
    CREATE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$
    BEGIN
        RAISE EXCEPTION '% is append-only', TG_TABLE_NAME USING ERRCODE = 'integrity_constraint_violation';
    END $$
    """,
    """
    CREATE FUNCTION refuse_author() RETURNS trigger LANGUAGE plpgsql AS $$
    BEGIN
        IF NEW.decision IN ('approve', 'reject') AND EXISTS (
            SELECT 1 FROM submission_authors
            WHERE submission_id = NEW.submission_id AND account_id = NEW.decided_by
        ) THEN
            RAISE EXCEPTION 'an author decides on their own submission'
                USING ERRCODE = 'integrity_constraint_violation';
        END IF;
        RETURN NEW;
    END $$
    """,
    """
    CREATE FUNCTION refuse_other_head() RETURNS trigger LANGUAGE plpgsql AS $$
    BEGIN
        IF NEW.id <> OLD.id OR NEW.size <> OLD.size + 1 THEN
            RAISE EXCEPTION 'the head moves by one entry' USING ERRCODE = 'integrity_constraint_violation';
        END IF;
        RETURN NEW;
    END $$
    """,
)

POSTGRESQL_CHANGE_FUNCTIONS = (
    """
    CREATE FUNCTION refuse_proposer() RETURNS trigger LANGUAGE plpgsql AS $$
    BEGIN
        IF NEW.decision <> 'withdraw' AND EXISTS (
            SELECT 1 FROM loop_changes WHERE id = NEW.change_id AND proposed_by = NEW.decided_by
        ) THEN
            RAISE EXCEPTION 'an author decides on their own change'
                USING ERRCODE = 'integrity_constraint_violation';
        END IF;
        RETURN NEW;
    END $$
    """,
)
"""Beside POSTGRESQL_FUNCTIONS, which the first migration has made."""


def append_only(dialect: str, table: str, *keys: Key) -> Iterator[str]:
    """Make the statements that let rows be inserted into `table` and nothing else; `keys` are all unique
    keys.
    """
    if dialect == "sqlite":
        yield _sqlite_refusal(table, "update", "UPDATE", f"{table} is append-only")
        yield _sqlite_refusal(table, "delete", "DELETE", f"{table} is append-only")
        # INSERT OR REPLACE deletes past the DELETE trigger wherever recursive_triggers is off
        taken = " OR ".join(f"({_equal_to_new(key)})" for key in keys)
        condition = f"EXISTS (SELECT 1 FROM {table} WHERE {taken})"  # noqa: S608  a migration's own names
        yield _sqlite_refusal(table, "replace", "INSERT", f"{table} is append-only", condition)
    else:
        yield from _postgresql_trigger(table, "refuse_change", "UPDATE OR DELETE", "ROW")
        yield from _postgresql_trigger(table, "refuse_change", "TRUNCATE", "STATEMENT", "truncate")


def independent_decisions(dialect: str) -> Iterator[str]:
    """Make the statements that keep authors from approving or rejecting their own submission."""
    if dialect == "sqlite":
        condition = (
            "NEW.decision IN ('approve', 'reject') AND EXISTS (SELECT 1 FROM submission_authors"
            " WHERE submission_id = NEW.submission_id AND account_id = NEW.decided_by)"
        )
        message = "an author decides on their own submission"
        yield _sqlite_refusal("decisions", "author", "INSERT", message, condition)
    else:
        yield from _postgresql_trigger("decisions", "refuse_author", "INSERT", "ROW", "author")


def independent_confirmations(dialect: str) -> Iterator[str]:
    """Make the statements that keep whoever proposed a change of a loop from confirming or rejecting it."""
    if dialect == "sqlite":
        condition = (
            "NEW.decision <> 'withdraw' AND EXISTS (SELECT 1 FROM loop_changes"
            " WHERE id = NEW.change_id AND proposed_by = NEW.decided_by)"
        )
        message = "an author decides on their own change"
        yield _sqlite_refusal("loop_change_decisions", "author", "INSERT", message, condition)
    else:
        yield from _postgresql_trigger("loop_change_decisions", "refuse_proposer", "INSERT", "ROW", "author")


def head_moves_by_one(dialect: str) -> Iterator[str]:
    """Make the statements that let the head of the history only move by one entry at a time."""
    if dialect == "sqlite":
        condition = "NEW.id <> OLD.id OR NEW.size <> OLD.size + 1"
        yield _sqlite_refusal("history_head", "update", "UPDATE", "the head moves by one entry", condition)
        yield _sqlite_refusal("history_head", "delete", "DELETE", "the head stays")
        condition = "EXISTS (SELECT 1 FROM history_head)"
        yield _sqlite_refusal("history_head", "replace", "INSERT", "the head stays", condition)
    else:
        yield from _postgresql_trigger("history_head", "refuse_other_head", "UPDATE", "ROW", "other")
        yield from _postgresql_trigger("history_head", "refuse_change", "DELETE", "ROW")
        yield from _postgresql_trigger("history_head", "refuse_change", "TRUNCATE", "STATEMENT", "truncate")


def names_stay(dialect: str) -> Iterator[str]:
    """Make the statements that keep an account, and its name, from ever being given to somebody else."""
    if dialect == "sqlite":
        yield _sqlite_refusal("accounts", "delete", "DELETE", "accounts are closed, not deleted")
        yield _sqlite_refusal("accounts", "rename", "UPDATE OF id, name", "an account keeps its name")
        condition = "EXISTS (SELECT 1 FROM accounts WHERE id = NEW.id OR name = NEW.name)"
        yield _sqlite_refusal("accounts", "replace", "INSERT", "accounts are closed, not deleted", condition)
    else:
        yield from _postgresql_trigger("accounts", "refuse_change", "DELETE", "ROW")
        yield from _postgresql_trigger("accounts", "refuse_change", "UPDATE OF id, name", "ROW", "rename")
        yield from _postgresql_trigger("accounts", "refuse_change", "TRUNCATE", "STATEMENT", "truncate")


def _sqlite_refusal(table: str, name: str, operation: str, message: str, condition: str = "1") -> str:
    return (
        f"CREATE TRIGGER {table}_refuses_{name} BEFORE {operation} ON {table} FOR EACH ROW"
        f" WHEN {condition} BEGIN SELECT RAISE(ABORT, '{message}'); END"
    )


def _postgresql_trigger(
    table: str, function: str, operation: str, level: str, name: str = "change"
) -> Iterator[str]:
    trigger = f"{table}_refuses_{name}"
    yield (
        f"CREATE TRIGGER {trigger} BEFORE {operation} ON {table}"
        f" FOR EACH {level} EXECUTE FUNCTION {function}()"
    )
    # a session in the replica role skips triggers that are not
    yield f"ALTER TABLE {table} ENABLE ALWAYS TRIGGER {trigger}"


def _equal_to_new(key: Key) -> str:
    return " AND ".join(f"{column} = NEW.{column}" for column in key)
