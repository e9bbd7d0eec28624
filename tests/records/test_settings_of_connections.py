"""What a connection that writes asks of its database, however that is set up."""

from __future__ import annotations

from sqlalchemy import text

from tests.databases import is_sqlite
from tests.records.store import Store


def test_a_commit_is_acknowledged_when_it_is_on_the_disk(store: Store) -> None:
    """The tests' own PostgreSQL is set otherwise."""
    with store.database.writing() as session:
        setting = "PRAGMA synchronous" if is_sqlite(store.url) else "SHOW synchronous_commit"
        # 2 is FULL
        assert session.execute(text(setting)).scalar_one() == (2 if is_sqlite(store.url) else "on")


def test_a_writer_does_not_wait_for_ever_for_another(store: Store) -> None:
    with store.database.writing() as session:
        setting = "PRAGMA busy_timeout" if is_sqlite(store.url) else "SHOW lock_timeout"
        assert session.execute(text(setting)).scalar_one() == (30_000 if is_sqlite(store.url) else "30s")
