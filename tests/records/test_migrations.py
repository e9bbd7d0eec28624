"""Migrations: they make what the models say, from the source tree and from the installed package."""

from __future__ import annotations

import re
from datetime import timedelta
from pathlib import Path

import pytest
from alembic.autogenerate import compare_metadata
from alembic.runtime.migration import MigrationContext

from service.records import history, migrating
from service.records.database import Database, system_clock
from service.records.errors import StoreNotUsable
from service.records.tables import collection
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


def test_a_store_without_its_tables_is_not_current(tmp_path: Path) -> None:
    database = Database(f"sqlite:///{tmp_path / 'empty.db'}", system_clock, CHEAP)
    with database.reading() as session:
        assert not migrating.is_current(session)
    database.close()


def test_a_migrated_store_is_current(store: Store) -> None:
    with store.database.reading() as session:
        assert migrating.is_current(session)


def test_the_first_entry_says_whether_the_store_is_a_demonstrations(tmp_path: Path) -> None:
    for demonstration in (True, False):
        url = f"sqlite:///{tmp_path / f'{demonstration}.db'}"
        migrating.migrate(url, now=START, demonstration=demonstration)
        # what is said once stays said
        migrating.migrate(url, now=START, demonstration=not demonstration)
        database = Database.open(url)
        with database.reading() as session:
            assert history.is_demonstration(session) is demonstration
        database.close()


def test_only_a_demonstrations_store_takes_another_clock(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'real.db'}"
    migrating.migrate(url, now=START)
    with pytest.raises(StoreNotUsable):
        Database.open(url, clock=Clock())


def test_scripts_are_found_inside_an_installed_package(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    installed = tmp_path / "service" / "records"
    (installed / "migrations").mkdir(parents=True)
    monkeypatch.setattr(migrating, "__file__", str(installed / "migrating.py"))
    assert migrating.scripts_folder() == installed / "migrations"
