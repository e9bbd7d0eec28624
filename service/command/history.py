"""`gain-signoff history`: does the store still say what it was told?"""

from __future__ import annotations

import json
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import TextIO

import click

from service.command import store
from service.command.errors import UserMistake
from service.command.store import Visit
from service.records import history_queries
from service.records.history_queries import HistoryFilter
from service.records.roles import CONSOLE
from service.records.views import EventView
from service.settings import Settings
from service.verification import verifier
from service.verification.export import verify_export
from service.verification.report import Report
from service.verification.verifier import Checkpoint

ENTRIES_AT_A_TIME = 500
EXISTING = click.Path(exists=True, dir_okay=False, path_type=Path)


@click.group()
def history() -> None:
    """Verify and export the history of the records."""


@history.command()
@click.option("--checkpoint", "held", type=EXISTING, help="A checkpoint that was kept outside the database.")
@click.option("--export", "exported", type=EXISTING, help="Verify this export in place of the database.")
def verify(held: Path | None, exported: Path | None) -> None:
    """Recompute the history from its bytes, and every row that an entry vouches for.

    Exit status 1 and the first place that does not hold, where there is one. Without a checkpoint that is
    held elsewhere, a history that was rewritten whole or cut off at its end cannot be told from a true one.
    """
    report = _report(_read(held), exported)
    _tell(report)
    if report.fault is not None:
        click.echo(f"The history does not hold. {report.fault.sentence()}", err=True)
        sys.exit(1)


@history.command()
@click.argument("file", type=click.File("w", encoding="utf-8", lazy=False))
def export(file: TextIO) -> None:
    """Write every entry to FILE (- is standard output), one a line, for `history verify --export`."""
    with store.reading() as visit:
        for entry in _entries(visit):
            line = {
                "number": entry.number,
                "digest": entry.digest,
                "canonical": entry.canonical.decode(),
            }
            file.write(json.dumps(line, ensure_ascii=False) + "\n")


def _entries(visit: Visit) -> Iterator[EventView]:
    after: str | None = None
    while True:
        page = history_queries.history(visit.session, CONSOLE, HistoryFilter(), after, ENTRIES_AT_A_TIME)
        yield from page.items
        if page.after is None:
            return
        after = page.after


def _report(checkpoint: Checkpoint | None, exported: Path | None) -> Report:
    if exported is None:
        return verifier.verify(Settings.from_environment().database_url, checkpoint=checkpoint)
    with exported.open("rb") as lines:
        return verify_export(lines, checkpoint=checkpoint)


def _read(file: Path | None) -> Checkpoint | None:
    try:
        return Checkpoint.read(file.read_bytes()) if file else None
    except ValueError as refused:
        raise UserMistake(f"{file}: {refused}") from None


def _tell(report: Report) -> None:
    for note in report.notes:
        click.echo(f"Note: {note}.")
    if report.fault is None:
        click.echo(f"The history holds: {report.entries} entries, {report.rows} rows of other tables.")
        click.echo(f"Last digest  {report.head}")
        click.echo(f"Merkle root  {report.root}")
        click.echo(_compared(report.checkpoint_size))
    click.echo(f"Covered: {', '.join(report.covered)}.")
    if report.not_covered:
        click.echo(f"Not covered: {', '.join(report.not_covered)}.")


def _compared(size: int | None) -> str:
    if size is None:
        return "No checkpoint was given: an end cut off, or a history rewritten whole, would not be seen."
    return f"The first {size} entries are those that the checkpoint was made of."
