"""Migrations: they make what the models say, from the source tree and from the installed package."""

from __future__ import annotations

import re
import stat
from collections.abc import Iterator
from datetime import timedelta
from pathlib import Path

import pytest
from alembic.autogenerate import compare_metadata
from alembic.runtime.migration import MigrationContext

from service.records import history, migrating
from service.records.database import Database, system_clock
from service.records.errors import StoreNotUsable
from service.records.tables import collection
from tests.databases import Databases
from tests.records.store import CHEAP, START, Clock, Store


def test_models_and_migrations_do_not_differ(store: Store) -> None:
    with migrating.open_for_migration(store.url) as connection:
        context = MigrationContext.configure(connection, opts={"compare_type": True})
        assert compare_metadata(context, collection.metadata()) == []


def test_migration_files_are_named_by_date() -> None:
    files = list((migrating.scripts_folder() / "versions").glob("*.py"))
    assert files
    assert all(re.fullmatch(r"\d{4}-\d{2}-\d{2}-[a-z0-9_]+\.py", file.name) for file in files)


def test_migrating_again_changes_nothing(store: Store) -> None:
    before = store.events()
    migrating.migrate(store.url, now=START + timedelta(days=1))
    assert store.events() == before


@pytest.fixture
def empty(databases: Databases) -> Iterator[str]:
    url = databases.new()
    yield url
    databases.drop(url)


def test_a_store_without_its_tables_is_not_current(empty: str) -> None:
    database = Database(empty, system_clock, CHEAP)
    with database.reading() as session:
        assert not migrating.is_current(session)
    database.close()


def test_a_migrated_store_is_current(store: Store) -> None:
    with store.database.reading() as session:
        assert migrating.is_current(session)


@pytest.mark.parametrize("demonstration", [True, False])
def test_the_first_entry_says_whether_the_store_is_a_demonstrations(empty: str, demonstration: bool) -> None:
    migrating.migrate(empty, now=START, demonstration=demonstration)
    # what is said once stays said
    migrating.migrate(empty, now=START, demonstration=not demonstration)
    database = Database.open(empty)
    with database.reading() as session:
        assert history.is_demonstration(session) is demonstration
    database.close()


def test_only_a_demonstrations_store_takes_another_clock(empty: str) -> None:
    migrating.migrate(empty, now=START)
    with pytest.raises(StoreNotUsable):
        Database.open(empty, clock=Clock())


def test_scripts_are_found_inside_an_installed_package(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    installed = tmp_path / "service" / "records"
    (installed / "migrations").mkdir(parents=True)
    monkeypatch.setattr(migrating, "__file__", str(installed / "migrating.py"))
    assert migrating.scripts_folder() == installed / "migrations"


def test_a_new_sqlite_store_is_readable_by_its_owner_alone(tmp_path: Path) -> None:
    migrating.migrate(f"sqlite:///{tmp_path / 'store.db'}", now=START, demonstration=True)
    store = Store(f"sqlite:///{tmp_path / 'store.db'}")
    store.add_people()
    modes = {file.name: stat.S_IMODE(file.stat().st_mode) for file in tmp_path.iterdir()}
    store.database.close()
    assert modes == dict.fromkeys(("store.db", "store.db-wal", "store.db-shm"), 0o600)
