"""What the service's own role may do in PostgreSQL: read, insert, and change working tables as it must.

The owner of the tables migrates and does nothing else. The role that the service runs with can neither
change nor delete what is kept, whatever a fault in the service or a stolen password makes it try. SQLite has
no roles: there, whoever can write the file can do anything to it.
"""

from __future__ import annotations

from collections.abc import Iterator

from sqlalchemy import Connection, Table, inspect, text

from service.records.errors import StoreNotUsable
from service.records.history import TIE
from service.records.tables import collection

EVENTS = "history_events"
VERSION = "alembic_version"
KEPT_RIGHTS = ("SELECT", "INSERT")
WORKING_RIGHTS: dict[str, tuple[str, ...]] = {
    "history_head": ("SELECT", "UPDATE (size, digest, time, right_edge)"),
    "accounts": (
        "SELECT",
        "INSERT",
        "UPDATE (full_name, password_hash, closed_at, last_used_at, reset_by)",
    ),
    "account_roles": ("SELECT", "INSERT", "DELETE"),
    "account_areas": ("SELECT", "INSERT", "DELETE"),
    "tokens": ("SELECT", "INSERT", "UPDATE (revoked_at, last_used_at)"),
    "sign_in_sessions": ("SELECT", "INSERT", "UPDATE (last_used_at, ended_at)"),
    "throttles": ("SELECT", "INSERT", "UPDATE", "DELETE"),
    "idempotency_keys": ("SELECT", "INSERT"),
    VERSION: ("SELECT",),
}
"""Rights in tables whose rows are not kept for good. A new table is named here, or the service has no use of
it.
"""


def rights(table: Table) -> tuple[str, ...]:
    """Return the rights in a table. Raises KeyError where nobody has said which."""
    is_kept = TIE in table.columns or table.name == EVENTS
    return KEPT_RIGHTS if is_kept else WORKING_RIGHTS[table.name]


def grant(connection: Connection, role: str) -> None:
    """Give a role exactly the service's rights, and take from it whatever else it had in these tables.

    Raises StoreNotUsable where the database has no roles, or not this one, or where the role could change
    what is kept all the same: as the owner, as a superuser, or by a right that everybody has.
    """
    if connection.dialect.name != "postgresql":
        raise StoreNotUsable("only PostgreSQL has roles")
    _check_role(connection, role)
    quote = connection.dialect.identifier_preparer.quote_identifier
    schema = str(connection.execute(text("SELECT current_schema()")).scalar_one())
    connection.execute(text(f"GRANT USAGE ON SCHEMA {quote(schema)} TO {quote(role)}"))
    for name, wanted in _all_rights():
        connection.execute(text(f"REVOKE ALL ON {quote(name)} FROM {quote(role)}"))
        connection.execute(text(f"GRANT {', '.join(wanted)} ON {quote(name)} TO {quote(role)}"))
    if _may_change(connection, role):
        raise StoreNotUsable(f"{role} may change what is kept by a right that it has from elsewhere")


def grant_again(connection: Connection) -> None:
    """Give every role that the service runs with its rights in tables that a migration has added."""
    if connection.dialect.name == "postgresql":
        for role in _service_roles(connection):
            grant(connection, role)


def may_change_what_is_kept(connection: Connection) -> bool:
    """Say whether the role of this connection could change kept rows, were it not for the triggers."""
    if connection.dialect.name != "postgresql":
        return False
    return _may_change(connection, str(connection.execute(text("SELECT current_user")).scalar_one()))


def _may_change(connection: Connection, role: str) -> bool:
    query = text("SELECT has_table_privilege(:role, :events, 'UPDATE, DELETE, TRUNCATE')")
    return bool(connection.execute(query, {"role": role, "events": EVENTS}).scalar_one())


def _all_rights() -> Iterator[tuple[str, tuple[str, ...]]]:
    for table in collection.metadata().sorted_tables:
        yield table.name, rights(table)
    yield VERSION, WORKING_RIGHTS[VERSION]


def _check_role(connection: Connection, role: str) -> None:
    query = text(
        "SELECT rolsuper OR pg_has_role(rolname, current_user, 'MEMBER') FROM pg_roles WHERE rolname = :role"
    )
    is_as_the_owner = connection.execute(query, {"role": role}).scalar_one_or_none()
    if is_as_the_owner is None:
        raise StoreNotUsable(f"the database has no role {role}; CREATE ROLE makes it")
    if is_as_the_owner:
        raise StoreNotUsable(f"{role} is no role of its own: it has the rights of the owner or more")


def _service_roles(connection: Connection) -> list[str]:
    if not inspect(connection).has_table(EVENTS):
        return []
    query = text(
        "SELECT DISTINCT grantee FROM information_schema.role_table_grants"
        " WHERE table_schema = current_schema() AND table_name = :events"
        " AND privilege_type = 'INSERT' AND grantee <> current_user"
    )
    return list(connection.execute(query, {"events": EVENTS}).scalars())
