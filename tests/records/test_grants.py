"""The role that the service runs with can do the service's work, and cannot change what is kept."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import pytest
from psycopg import sql
from sqlalchemy import inspect, text
from sqlalchemy.exc import DBAPIError

from service.records import accounts, grants, idempotency, migrating, sign_ins, tokens
from service.records.errors import NotAuthenticated, StoreNotUsable
from service.records.idempotency import KeptAnswer
from service.records.roles import CONSOLE
from service.records.tables import collection
from service.verification.verifier import verify
from tests.clusters import Cluster
from tests.databases import opened, run
from tests.records.store import START, Store, password_of
from tests.records.year import live

OWNER, SERVICE, DATABASE = "gain_owner", "gain_service", "gain_signoff"
README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")


@pytest.fixture(scope="module")
def roles(cluster: Cluster) -> Cluster:
    for statement in _set_up():
        if statement.startswith("CREATE ROLE"):
            cluster.administer(sql.SQL(statement))
    return cluster


@pytest.fixture
def database(roles: Cluster) -> Iterator[str]:
    """An empty database, set up by the README's commands."""
    for statement in _set_up():
        if not statement.startswith("CREATE ROLE"):
            roles.administer(sql.SQL(statement))
    yield DATABASE
    roles.drop(DATABASE)


def _set_up() -> list[str]:
    (block,) = re.findall(r"^```sql\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    return [statement.strip() for statement in block.split(";") if statement.strip()]


@pytest.fixture
def served(roles: Cluster, database: str) -> Iterator[Store]:
    """A store that the owner has made and the service works in."""
    migrating.migrate(roles.url(database, OWNER), now=START, demonstration=True, service_role=SERVICE)
    store = Store(roles.url(database, SERVICE))
    store.add_people()
    yield store
    store.database.close()


def test_the_service_does_all_its_work_with_its_own_role(served: Store) -> None:
    live(served)
    _sign_in_and_out(served)
    with served.database.writing() as session:
        now = served.clock()
        accounts.change_access(session, CONSOLE, "second", ("auditor",), ("Drying",), "moved", now)
        accounts.rename(session, CONSOLE, "second", "Other", "married", now)
        accounts.reset_password(session, CONSOLE, "second", "a password to be changed", "lost", now)
        view, _ = tokens.issue(session, CONSOLE, "auditor", "tool", now)
        tokens.note_use(session, view.id, now)
        tokens.revoke(session, CONSOLE, view.id, "lost", now)
        accounts.close(session, CONSOLE, "colleague", "left", now)
        answer = KeptAnswer(fingerprint="f" * 64, status=201, location=None, etag=None, body=b"{}")
        idempotency.keep(session, served.actor("auditor"), "key", answer, now)
    assert verify(served.url).holds


def _sign_in_and_out(served: Store) -> None:
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(served.database, "reviewer", "wrong " * 4, "127.0.0.1")
    started = sign_ins.sign_in(served.database, "reviewer", password_of("reviewer"), "127.0.0.1")
    with served.database.writing() as session:
        present = sign_ins.resume(session, started.secret, served.clock())
        sign_ins.note_use(session, present.id, served.clock())
        sign_ins.sign_out(session, present.id, served.clock())


KEPT = sorted(
    table.name
    for table in collection.metadata().sorted_tables
    if table.name == grants.EVENTS or grants.TIE in table.columns
)


@pytest.mark.parametrize("table", KEPT)
def test_the_services_role_can_neither_change_nor_delete_what_is_kept(served: Store, table: str) -> None:
    column = "kind" if table == grants.EVENTS else grants.TIE
    with opened(served.url) as connection:
        for statement in (
            f"UPDATE {table} SET {column} = {column}",  # noqa: S608  names of our own tables
            f"DELETE FROM {table}",  # noqa: S608
            f"TRUNCATE {table} CASCADE",
            f"ALTER TABLE {table} DISABLE TRIGGER ALL",
            f"DROP TABLE {table} CASCADE",
        ):
            with pytest.raises(DBAPIError, match=r"permission denied|must be owner"):
                run(connection, statement)


@pytest.mark.parametrize(
    "statement",
    [
        "DELETE FROM history_head",
        "INSERT INTO history_head SELECT * FROM history_head",
        "TRUNCATE accounts CASCADE",
        "DELETE FROM accounts",
        "UPDATE accounts SET name = 'another'",
        "UPDATE tokens SET account_id = account_id",
        "DELETE FROM idempotency_keys",
        "UPDATE alembic_version SET version_num = 'none'",
        "CREATE TABLE other (id int)",
        "SET session_replication_role = replica",
    ],
)
def test_nor_what_it_has_no_business_with(served: Store, statement: str) -> None:
    with opened(served.url) as connection, pytest.raises(DBAPIError, match="permission denied"):
        run(connection, statement)


def test_every_table_has_its_rights(served: Store) -> None:
    with opened(served.url) as connection:
        names = set(inspect(connection).get_table_names())
    assert {name for name, _ in grants._all_rights()} == names


def test_a_later_migration_remembers_the_services_role(roles: Cluster, served: Store, database: str) -> None:
    owner = roles.url(database, OWNER)
    with opened(owner) as connection:
        # as though a migration had just made this table
        run(connection, f"REVOKE ALL ON loop_changes FROM {SERVICE}")
    migrating.migrate(owner, now=START)
    with served.database.reading() as session:
        assert session.execute(text("SELECT count(*) FROM loop_changes")).scalar_one() == 0


def test_a_store_tells_whether_its_role_could_change_what_is_kept(
    roles: Cluster, served: Store, database: str
) -> None:
    for role, may in ((SERVICE, False), (OWNER, True)):
        with opened(roles.url(database, role)) as connection:
            assert grants.may_change_what_is_kept(connection) is may


@pytest.mark.parametrize(
    ("role", "says"),
    [("nobody_at_all", "has no role"), (OWNER, "rights of the owner"), ("postgres", "or more")],
)
def test_a_role_that_would_be_none_of_its_own_is_refused(
    roles: Cluster, database: str, role: str, says: str
) -> None:
    with pytest.raises(StoreNotUsable, match=says):
        migrating.migrate(roles.url(database, OWNER), now=START, service_role=role)


def test_a_right_that_everybody_has_is_found(roles: Cluster, served: Store, database: str) -> None:
    owner = roles.url(database, OWNER)
    with opened(owner) as connection:
        run(connection, "GRANT DELETE ON history_events TO PUBLIC")
    with pytest.raises(StoreNotUsable, match="from elsewhere"):
        migrating.migrate(owner, now=START, service_role=SERVICE)
