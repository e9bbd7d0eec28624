"""The store: one engine that writes, one that only reads, and the one transaction round each request."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime

from argon2 import PasswordHasher
from sqlalchemy import Connection, Engine, create_engine, event, make_url
from sqlalchemy.engine.interfaces import DBAPIConnection, ExceptionContext
from sqlalchemy.exc import InterfaceError, InternalError, OperationalError, TimeoutError
from sqlalchemy.orm import Session, sessionmaker

from service.records import history, passwords
from service.records.errors import StoreNotUsable

Clock = Callable[[], datetime]

SQLITE_PRAGMAS = (
    "journal_mode=WAL",
    "synchronous=FULL",
    # without it INSERT OR REPLACE deletes rows past the triggers
    "recursive_triggers=ON",
    "busy_timeout=30000",
)
"""What SQLite forgets with every connection."""

POSTGRESQL_SETTINGS = (
    # a server that is set otherwise acknowledges what a fault can still take back
    "synchronous_commit = on",
    # as long as SQLite waits; a worker that hangs with the lock must not stop all others for good
    "lock_timeout = '30s'",
    "idle_in_transaction_session_timeout = '60s'",
)
"""What a writing connection asks of the server, whatever its own settings are."""

READ_ONLY = "25006"
"""PostgreSQL's code for a write in a transaction that may not."""


CANNOT_BE_USED = (OperationalError, InterfaceError, InternalError, TimeoutError)
"""Down, locked, full, read-only, no free connection: the drivers and the pool say it in these four ways."""


def system_clock() -> datetime:
    """Return the time now, in UTC."""
    return datetime.now(UTC)


class Database:
    """An open store. `writing()` and `reading()` are its only two ways in.

    Writers take turns: SQLite by BEGIN IMMEDIATE, PostgreSQL by a lock on the head of the history. Whatever a
    writer has checked therefore still holds when it commits.
    """

    def __init__(self, url: str, clock: Clock, password_hasher: PasswordHasher) -> None:
        self.clock = clock
        self._writer = _engine(url, begin="BEGIN IMMEDIATE", pragmas=("foreign_keys=ON",))
        self._reader = _engine(url, begin="BEGIN", pragmas=("query_only=ON",), read_only=True)
        info = {"password_hasher": password_hasher}
        self._write = sessionmaker(self._writer, autoflush=False, expire_on_commit=False, info=info)
        self._read = sessionmaker(self._reader, autoflush=False, expire_on_commit=False, info=info)

    @classmethod
    def open(
        cls, url: str, *, clock: Clock = system_clock, password_hasher: PasswordHasher | None = None
    ) -> Database:
        """Open a store that `migrating.migrate` has made.

        Another clock than the system's is for demonstrations: raises StoreNotUsable where the first entry of
        the store's history does not say that it is one. `password_hasher` defaults to RFC 9106's parameters.
        """
        database = cls(url, clock, password_hasher or passwords.default_hasher())
        try:
            database._check_clock()
        except BaseException:
            database.close()
            raise
        return database

    def _check_clock(self) -> None:
        if self.clock is not system_clock:
            with self.reading() as session:
                if not history.is_demonstration(session):
                    raise StoreNotUsable("only the store of a demonstration runs on another clock")

    def now(self) -> datetime:
        """Return the time by the store's clock, in UTC."""
        return self.clock()

    @contextmanager
    def writing(self) -> Iterator[Session]:
        """One transaction that may write: committed at the end, rolled back on any exception."""
        with self._write.begin() as session:
            history.take_turn(session)
            yield session

    @contextmanager
    def reading(self) -> Iterator[Session]:
        """One transaction that sees one state of the store and cannot write."""
        with self._read() as session:
            yield session

    def close(self) -> None:
        """Close every connection."""
        self._writer.dispose()
        self._reader.dispose()


def migrating_engine(url: str) -> Engine:
    """Return the engine of migrations.

    A table that is made anew in SQLite must not take its referrers along.
    """
    return _engine(url, begin="BEGIN IMMEDIATE", pragmas=("foreign_keys=OFF",))


def _engine(url: str, *, begin: str, pragmas: tuple[str, ...], read_only: bool = False) -> Engine:
    # parameters are hidden: a failed statement would bring reasons and hashes of passwords into the log
    if make_url(url).get_backend_name() != "sqlite":
        if read_only:
            options = {"isolation_level": "REPEATABLE READ", "postgresql_readonly": True}
            return create_engine(url, hide_parameters=True, execution_options=options)
        # the lock on the head is what keeps the order; a snapshot taken before it would fork the chain
        engine = create_engine(url, hide_parameters=True, isolation_level="READ COMMITTED")
        event.listen(engine, "connect", _set_up_postgresql)
        event.listen(engine, "handle_error", _leave_a_read_only_session)
        return engine
    # the driver's own way of beginning is late: it reads before it locks, and then finds the store busy
    engine = create_engine(url, hide_parameters=True, connect_args={"isolation_level": None})

    @event.listens_for(engine, "connect")
    def _set_pragmas(connection: DBAPIConnection, _record: object) -> None:
        cursor = connection.cursor()
        for pragma in (*SQLITE_PRAGMAS, *pragmas):
            cursor.execute(f"PRAGMA {pragma}")
        cursor.close()

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        connection.exec_driver_sql(begin)

    return engine


def _set_up_postgresql(connection: DBAPIConnection, _record: object) -> None:
    cursor = connection.cursor()
    for setting in POSTGRESQL_SETTINGS:
        cursor.execute(f"SET {setting}")
    cursor.close()
    # a rollback would take them back
    connection.commit()


def _leave_a_read_only_session(failure: ExceptionContext) -> None:
    # a session keeps what was the database's default when it began; the next one may write again
    if getattr(failure.original_exception, "sqlstate", None) == READ_ONLY:
        failure.is_disconnect = True
