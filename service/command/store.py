"""The store that the settings name, for commands: opened, used in one transaction, closed."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from sqlalchemy import make_url
from sqlalchemy.exc import SQLAlchemyError
from sqlalchemy.orm import Session

from service.command.errors import UserMistake
from service.documents.errors import FieldProblem
from service.records import grants, migrating
from service.records.database import Database
from service.records.errors import FieldErrors, RecordsError
from service.settings import Settings


@dataclass(frozen=True, kw_only=True, slots=True)
class Visit:
    """A transaction, and the time by the store's clock."""

    session: Session
    now: datetime


@contextmanager
def mistakes_in_a_sentence() -> Iterator[None]:
    """Turn what the records refuse, and a store that cannot be reached, into one sentence."""
    try:
        yield
    except FieldErrors as refused:
        raise UserMistake("; ".join(_sentence(problem) for problem in refused.errors)) from None
    except RecordsError as refused:
        raise UserMistake(refused.detail) from None
    except ModuleNotFoundError as missing:
        # a driver is an extra of its own and imported only when a database of its kind is named
        raise UserMistake(f"the database needs the package {missing.name}, which is not installed") from None
    except SQLAlchemyError as failed:
        # only the driver's own first line: the statement and the address of the database stay out
        reason = str(getattr(failed, "orig", None) or failed).partition("\n")[0]
        raise UserMistake(f"the database cannot be used: {reason}") from None


@contextmanager
def writing() -> Iterator[Visit]:
    """One transaction that may write."""
    with mistakes_in_a_sentence(), _open() as database, database.writing() as session:
        yield Visit(session=session, now=database.now())


@contextmanager
def reading() -> Iterator[Visit]:
    """One transaction that cannot write."""
    with mistakes_in_a_sentence(), _open() as database, database.reading() as session:
        yield Visit(session=session, now=database.now())


def may_change_what_is_kept() -> bool:
    """Say whether the database lets this role change kept rows.

    Raises UserMistake where the store is not there or not at the current schema.
    """
    with reading() as visit:
        return grants.may_change_what_is_kept(visit.session.connection())


@contextmanager
def _open() -> Iterator[Database]:
    url = Settings.from_environment().database_url
    _check_exists(url)
    database = Database.open(url)
    try:
        _check_schema(database)
        yield database
    finally:
        database.close()


def _check_exists(url: str) -> None:
    # SQLite would make an empty file, and the person would look for their records in it
    parts = make_url(url)
    if parts.get_backend_name() == "sqlite" and parts.database and not Path(parts.database).exists():
        raise UserMistake(f"there is no database {parts.database}; gain-signoff migrate makes it")


def _check_schema(database: Database) -> None:
    with database.reading() as session:
        if not migrating.is_current(session):
            raise UserMistake("the database is not at the current schema; run gain-signoff migrate first")


def _sentence(problem: FieldProblem) -> str:
    name = problem.pointer.strip("/").replace("/", " ")
    return f"{name}: {problem.detail}" if name else problem.detail
