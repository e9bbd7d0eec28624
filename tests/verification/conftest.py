"""A store with something in every kept table, and the means to tamper with it as its owner could."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import pytest
from sqlalchemy import inspect

from service.records import migrating
from service.verification.report import Report
from service.verification.verifier import Checkpoint, verify
from tests.databases import Databases, Statement, is_sqlite, opened, run, without_guards
from tests.records.store import START, Store
from tests.records.year import live


@dataclass(frozen=True)
class Owned:
    """A store in the hands of somebody who may do anything to it."""

    url: str

    @property
    def row_id(self) -> str:
        """What names a row whatever stands in it."""
        return "rowid" if is_sqlite(self.url) else "ctid::text"

    def verify(self, checkpoint: Checkpoint | None = None) -> Report:
        return verify(self.url, checkpoint=checkpoint)

    def execute(self, *statements: Statement) -> None:
        """Run statements with every trigger gone and no constraint checked that can be left out."""
        without_guards(self.url, *statements)

    def rows(self, query: str, *parameters: Any) -> list[tuple[Any, ...]]:
        with opened(self.url) as connection:
            return run(connection, (query, parameters))

    def value(self, query: str, *parameters: Any) -> Any:
        return self.rows(query, *parameters)[0][0]

    def columns(self, table: str) -> list[str]:
        with opened(self.url) as connection:
            return [column["name"] for column in inspect(connection).get_columns(table)]

    def tables(self) -> list[str]:
        with opened(self.url) as connection:
            return inspect(connection).get_table_names()

    def checkpoint(self) -> Checkpoint:
        report = self.verify()
        assert report.holds
        return Checkpoint(size=report.entries, root=report.root)


@pytest.fixture(scope="session")
def lived_in(databases: Databases) -> str:
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    store.add_people()
    live(store)
    store.database.close()
    return url


@pytest.fixture
def owned(lived_in: str, databases: Databases) -> Iterator[Owned]:
    owned = Owned(databases.copy_of(lived_in))
    yield owned
    databases.drop(owned.url)
