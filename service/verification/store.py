"""A store as it lies: entries and rows in the order of the history, values as the database gives them."""

from __future__ import annotations

import hashlib
from collections.abc import Generator, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import Connection, DateTime, Engine, create_engine, event, inspect, make_url, text
from sqlalchemy.pool import NullPool

EVENTS = "history_events"
HEAD = "history_head"
TIE = "event_number"
"""The column that ties a row to its entry. A table that has it is covered."""

ROWS_AT_A_TIME = 500

_STANDS_BETWEEN = text("""
    SELECT relation.relname, CASE
        WHEN place.nspname <> current_schema()
            THEN 'another relation of this name stands in the schema ' || place.nspname
        WHEN relation.relrowsecurity THEN 'row security decides who sees which of its rows'
        ELSE 'a rule changes what is done to it' END
    FROM pg_catalog.pg_class AS relation
    JOIN pg_catalog.pg_namespace AS place ON place.oid = relation.relnamespace
    WHERE relation.relname = ANY(:names)
        AND relation.relkind IN ('r', 'p', 'v', 'm', 'f')
        AND place.nspname NOT LIKE 'pg@_%' ESCAPE '@'
        AND (place.nspname <> current_schema() OR relation.relrowsecurity
            OR EXISTS (SELECT FROM pg_catalog.pg_rewrite AS rule WHERE rule.ev_class = relation.oid))
    ORDER BY 1, 2 LIMIT 1
""")


@dataclass(frozen=True, kw_only=True, slots=True)
class Table:
    """A covered table: its columns but the tie, which of them are times, and what names a row."""

    name: str
    columns: tuple[str, ...]
    times: frozenset[str]
    key: tuple[str, ...]

    def row_name(self, row: Mapping[str, Any]) -> str:
        """Name a row by its key."""
        return ", ".join([f"{column} {row[column]}" for column in self.key])

    def values(self, row: Mapping[str, Any]) -> dict[str, object]:
        """Return what an entry records of a row: bytes by their SHA-256, times in RFC 3339."""
        return {name: _value(row[name], name in self.times) for name in self.columns}


@contextmanager
def opened(url: str) -> Iterator[Connection]:
    """Open a store for reading, in one transaction that sees one state of it."""
    engine = _engine(url)
    try:
        with engine.connect() as connection:
            yield connection
    finally:
        engine.dispose()


def tables(connection: Connection) -> tuple[tuple[Table, ...], tuple[str, ...]]:
    """Return the tables that are covered, and the names of those that are not."""
    found = inspect(connection)
    covered, others = [], []
    for name in sorted(found.get_table_names()):
        columns = found.get_columns(name)
        names = tuple(column["name"] for column in columns)
        if TIE not in names:
            others.append(name)
            continue
        covered.append(
            Table(
                name=name,
                columns=tuple(column for column in names if column != TIE),
                times=frozenset(c["name"] for c in columns if isinstance(c["type"], DateTime)),
                key=tuple(found.get_pk_constraint(name)["constrained_columns"]),
            )
        )
    return tuple(covered), tuple(name for name in others if name not in (EVENTS, HEAD))


def rows(connection: Connection, table: str, order: str) -> Generator[Mapping[str, Any]]:
    """Read all rows of a table in order, a few at a time."""
    streaming = connection.execution_options(stream_results=True, yield_per=ROWS_AT_A_TIME)
    # names come from the database's own catalogue
    query = f'SELECT * FROM "{table}" ORDER BY "{order}"'  # noqa: S608
    with streaming.execute(text(query)) as result:
        for row in result.mappings():
            yield dict(row)


def count(connection: Connection, table: str) -> int:
    """Count the rows of a table."""
    return int(connection.execute(text(f'SELECT count(*) FROM "{table}"')).scalar_one())  # noqa: S608


def stands_between(connection: Connection, names: list[str]) -> tuple[str, str] | None:
    """Return the first of these tables that others may read otherwise than it was read here, and by what;
    None where there is none.

    In PostgreSQL a search path, a policy or a rule can give the service other rows than the verification.
    """
    if connection.dialect.name == "sqlite":
        return None
    found = connection.execute(_STANDS_BETWEEN, {"names": names}).one_or_none()
    return None if found is None else (str(found[0]), str(found[1]))


def damage(connection: Connection) -> str | None:
    """Return what the database itself finds wrong with its file; None where nothing, or where it cannot
    say.
    """
    if connection.dialect.name != "sqlite":
        return None
    found = str(connection.execute(text("PRAGMA integrity_check(1)")).scalar_one())
    return None if found == "ok" else found


def as_time(value: object) -> object:
    """Return a stored time as RFC 3339 in UTC; anything else as it is."""
    if isinstance(value, str):
        try:
            value = datetime.fromisoformat(value)
        except ValueError:
            return value
    if isinstance(value, datetime):
        aware = value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)
        return aware.isoformat().replace("+00:00", "Z")
    return value


def _value(value: object, is_time: bool) -> object:
    if isinstance(value, (bytes, memoryview)):
        return hashlib.sha256(value).hexdigest()
    return as_time(value) if is_time else value


def _engine(url: str) -> Engine:
    if make_url(url).get_backend_name() != "sqlite":
        options = {"isolation_level": "REPEATABLE READ", "postgresql_readonly": True}
        return create_engine(url, poolclass=NullPool, execution_options=options)
    engine = create_engine(url, poolclass=NullPool, connect_args={"isolation_level": None})

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        connection.exec_driver_sql("PRAGMA query_only=ON")
        connection.exec_driver_sql("BEGIN")

    return engine
