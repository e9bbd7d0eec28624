"""`gain-signoff history`: does the store still say what it was told?"""

from __future__ import annotations

import sys
from pathlib import Path

import click

from service.command.errors import UserMistake
from service.settings import Settings
from service.verification import verifier
from service.verification.report import Report
from service.verification.verifier import Checkpoint

EXISTING = click.Path(exists=True, dir_okay=False, path_type=Path)


@click.group()
def history() -> None:
    """Verify the history of the records."""


@history.command()
@click.option("--checkpoint", "held", type=EXISTING, help="A checkpoint that was kept outside the database.")
def verify(held: Path | None) -> None:
    """Recompute the history from its bytes, and every row that an entry vouches for.

    Exit status 1 and the first place that does not hold, where there is one. Without a checkpoint that is
    held elsewhere, a history that was rewritten whole or cut off at its end cannot be told from a true one.
    """
    report = verifier.verify(Settings.from_environment().database_url, checkpoint=_read(held))
    _tell(report)
    if report.fault is not None:
        click.echo(f"The history does not hold. {report.fault.sentence()}", err=True)
        sys.exit(1)


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
    click.echo(f"Not covered: {', '.join(report.not_covered)}.")


def _compared(size: int | None) -> str:
    if size is None:
        return "No checkpoint was given: an end cut off, or a history rewritten whole, would not be seen."
    return f"The first {size} entries are those that the checkpoint was made of."
