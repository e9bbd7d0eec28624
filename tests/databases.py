"""The two kinds of database that records are kept in, each made and copied in its own way.

A test takes the fixture `databases` and runs on both.
"""

from __future__ import annotations

import itertools
import os
import shutil
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

from psycopg import sql
from sqlalchemy import Connection, Engine, create_engine, inspect, make_url
from sqlalchemy.pool import NullPool

from tests.clusters import Cluster

Statement = str | tuple[str, Sequence[Any]]
"""SQL with `?` in the place of each parameter, alone or with the parameters."""


class Databases(Protocol):
    """Where stores are made."""

    name: str

    def new(self) -> str:
        """Make an empty database; return its address."""

    def copy_of(self, url: str) -> str:
        """Copy a database that nobody has open."""

    def drop(self, url: str) -> None:
        """Delete a database."""


@dataclass
class SqliteFiles:
    """Files in one folder."""

    folder: Path
    name: str = "sqlite"
    _numbers: itertools.count[int] = field(default_factory=itertools.count)

    def new(self) -> str:
        return f"sqlite:///{self.folder / f'store_{os.getpid()}_{next(self._numbers)}.db'}"

    def copy_of(self, url: str) -> str:
        copy = self.new()
        shutil.copy(file_of(url), file_of(copy))
        return copy

    def drop(self, url: str) -> None:
        for file in self.folder.glob(f"{file_of(url).name}*"):
            file.unlink()


@dataclass
class PostgresqlDatabases:
    """Databases of one server."""

    cluster: Cluster
    name: str = "postgresql"

    def new(self) -> str:
        return self.cluster.url(self.cluster.create())

    def copy_of(self, url: str) -> str:
        return self.cluster.url(self.cluster.create(make_url(url).database))

    def drop(self, url: str) -> None:
        self.cluster.drop(make_url(url).database or "")

    @contextmanager
    def read_only(self, url: str) -> Iterator[None]:
        """A database in which sessions may only read by default, every earlier session of it ended."""
        name = sql.Identifier(make_url(url).database or "")
        self.cluster.administer(
            sql.SQL("ALTER DATABASE {} SET default_transaction_read_only = on").format(name)
        )
        with opened(url) as connection:
            others = "FROM pg_stat_activity WHERE datname = current_database() AND pid <> pg_backend_pid()"
            run(connection, f"SELECT pg_terminate_backend(pid) {others}")
        yield
        self.cluster.administer(sql.SQL("ALTER DATABASE {} RESET default_transaction_read_only").format(name))


def file_of(url: str) -> Path:
    """The file of a SQLite database."""
    return Path(make_url(url).database or "")


def is_sqlite(url: str) -> bool:
    return make_url(url).get_backend_name() == "sqlite"


@contextmanager
def opened(url: str) -> Iterator[Connection]:
    """A connection as any other program of the owner has it: no setting of ours, each statement by itself."""
    engine = _engine(url)
    try:
        with engine.connect() as connection:
            yield connection
    finally:
        engine.dispose()


def _engine(url: str) -> Engine:
    if is_sqlite(url):
        return create_engine(url, poolclass=NullPool, connect_args={"isolation_level": None})
    return create_engine(url, poolclass=NullPool, isolation_level="AUTOCOMMIT")


def run(connection: Connection, statement: Statement) -> list[tuple[Any, ...]]:
    """Run one statement; return what it gives back."""
    text, parameters = (statement, ()) if isinstance(statement, str) else statement
    if connection.dialect.name != "sqlite":
        text = text.replace("%", "%%").replace("?", "%s") if parameters else text
    result = connection.exec_driver_sql(text, tuple(parameters))
    return [tuple(row) for row in result] if result.returns_rows else []


def without_guards(url: str, *statements: Statement) -> None:
    """Run statements with every trigger gone and no constraint checked that can be left out."""
    with opened(url) as connection:
        if is_sqlite(url):
            for (name,) in run(connection, "SELECT name FROM sqlite_master WHERE type = 'trigger'"):
                run(connection, f"DROP TRIGGER {name}")
            run(connection, "PRAGMA ignore_check_constraints = ON")
        else:
            _drop_postgresql_guards(connection)
        for statement in statements:
            run(connection, statement)


def _drop_postgresql_guards(connection: Connection) -> None:
    found = inspect(connection)
    for table in found.get_table_names():
        run(connection, f'ALTER TABLE "{table}" DISABLE TRIGGER ALL')
        for constraint in found.get_check_constraints(table):
            run(connection, f'ALTER TABLE "{table}" DROP CONSTRAINT "{constraint["name"]}"')
