"""`gain-signoff history`: does the store still say what it was told?"""

from __future__ import annotations

import sys
import time
from pathlib import Path
from typing import BinaryIO

import click

from service.command import store
from service.command.errors import UserMistake
from service.documents import writing
from service.records import full_export
from service.settings import Settings
from service.verification import verifier
from service.verification.checkpoints import Checkpoint
from service.verification.export import verify_export
from service.verification.report import Report, printable

EXISTING = click.Path(exists=True, dir_okay=False, path_type=Path)
PROGRESS_EVERY_S = 2.0


@click.group()
def history() -> None:
    """Verify and export the history of the records."""


@history.command()
@click.option("--checkpoint", "held", type=EXISTING, help="A checkpoint that was kept outside the database.")
@click.option("--export", "exported", type=EXISTING, help="Verify this export in place of the database.")
@click.option(
    "--public-key", "held_key", help="The public key, in base64, that was given to you on another way."
)
def verify(held: Path | None, exported: Path | None, held_key: str | None) -> None:
    """Recompute the history from its bytes, and every row that an entry vouches for.

    Exit status 1 and the first place that does not hold, where there is one. Without a checkpoint that is
    held elsewhere, a history that was rewritten whole or cut off at its end cannot be told from a true one.
    """
    report = _report(_read(held), exported, held_key)
    _tell(report)
    if report.fault is not None:
        click.echo(f"The history does not hold. {report.fault.sentence()}", err=True)
        sys.exit(1)


@history.command()
@click.argument("file", type=click.File("wb", lazy=False))
def export(file: BinaryIO) -> None:
    """Write every entry with its rows to FILE (- is standard output), one a line, for verify --export."""
    with store.reading() as visit:
        for entry in full_export.entries(visit.session):
            file.write(writing.to_bytes(entry) + b"\n")


class _Progress:
    """Tells on standard error how far a long verification has come."""

    def __init__(self) -> None:
        self._next = time.monotonic() + PROGRESS_EVERY_S

    def __call__(self, done: int, total: int) -> None:
        if time.monotonic() >= self._next:
            self._next += PROGRESS_EVERY_S
            click.echo(f"{done} of {total} entries verified", err=True)


def _report(checkpoint: Checkpoint | None, exported: Path | None, held_key: str | None) -> Report:
    if exported is None:
        url = Settings.from_environment().database_url
        return verifier.verify(url, checkpoint=checkpoint, held_key=held_key, progress=_Progress())
    with exported.open("rb") as lines:
        return verify_export(lines, checkpoint=checkpoint, held_key=held_key)


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
    for sentence in report.signatures:
        click.echo(f"Signatures: {sentence}.")
    click.echo(f"Covered: {_names(report.covered)}.")
    if report.not_covered:
        click.echo(f"Not covered: {_names(report.not_covered)}.")


def _names(tables: tuple[str, ...]) -> str:
    return ", ".join(map(printable, tables))


def _compared(size: int | None) -> str:
    if size is None:
        return "No checkpoint was given: an end cut off, or a history rewritten whole, would not be seen."
    return f"The first {size} entries are those that the checkpoint was made of."
