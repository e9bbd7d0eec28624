"""`gain-signoff backup` and `gain-signoff restore`, for a store in SQLite."""

from __future__ import annotations

import sys
from pathlib import Path

import click
from sqlalchemy import make_url

from service.command.errors import UserMistake
from service.command.store import mistakes_in_a_sentence
from service.records import backup as copies
from service.settings import Settings
from service.verification.report import Report
from service.verification.verifier import verify

OF_POSTGRESQL = "PostgreSQL has programs of its own for this, pg_dump and pg_restore; the README shows how"
NEW = click.Path(dir_okay=False, path_type=Path)
EXISTING = click.Path(exists=True, dir_okay=False, path_type=Path)


@click.command()
@click.argument("file", type=NEW)
def backup(file: Path) -> None:
    """Copy the store into FILE, also while the service runs, and verify the history of the copy.

    Keep the Merkle root that is printed elsewhere; it says which state of the history the copy has.
    """
    store = _store_file()
    if not store.exists():
        raise UserMistake(f"there is no database {store}")
    _copy_and_verify(store, file)


@click.command()
@click.argument("file", type=EXISTING)
def restore(file: Path) -> None:
    """Make the store that the settings name from the backup FILE, and verify its history.

    The store must not be there yet. What was recorded after the backup is not in it: only a checkpoint that
    was kept elsewhere shows that something is missing (history verify --checkpoint).
    """
    store = _store_file()
    if store.exists():
        raise UserMistake(f"{store} is there already; nothing is written over it")
    for beside in ("-wal", "-shm", "-journal"):
        # left by another store under this name, SQLite would play it into this one
        if store.with_name(store.name + beside).exists():
            raise UserMistake(f"{store}{beside} is left of another store; move it away first")
    _copy_and_verify(file, store)


def _store_file() -> Path:
    with mistakes_in_a_sentence():
        parts = make_url(Settings.from_environment().database_url)
    if parts.get_backend_name() != "sqlite":
        raise UserMistake(OF_POSTGRESQL)
    if not parts.database or parts.database == ":memory:":
        raise UserMistake("the settings name no file")
    return Path(parts.database)


def _copy_and_verify(source: Path, target: Path) -> None:
    with mistakes_in_a_sentence():
        copies.copy(source, target)
    report = verify(f"sqlite:///{target}")
    if report.fault is not None:
        click.echo(f"{target} is made; its history does not hold. {report.fault.sentence()}", err=True)
        sys.exit(1)
    _tell(target, report)


def _tell(target: Path, report: Report) -> None:
    click.echo(f"{target} is made; its history holds: {report.entries} entries.")
    click.echo(f"Last digest  {report.head}")
    click.echo(f"Merkle root  {report.root}")
