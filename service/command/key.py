"""`gain-signoff key`: what signs checkpoints. The file is kept outside the database, and backed up."""

from __future__ import annotations

import os
from pathlib import Path

import click

from service.command import store
from service.command.errors import UserMistake
from service.issuing import checkpoints, signing_keys
from service.issuing.base64_text import public_text
from service.issuing.checkpoints import SigningKey, UnusableKey
from service.records.roles import CONSOLE

FILE = click.Path(dir_okay=False, path_type=Path)


@click.group()
def key() -> None:
    """Make, show and change the key that signs checkpoints of the history."""


@key.command()
@click.argument("file", type=FILE)
def make(file: Path) -> None:
    """Make a key in FILE, which nobody but its owner may read, and print the public key."""
    try:
        descriptor = os.open(file, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    except OSError as failed:
        raise UserMistake(f"{file} cannot be made: {failed.strerror}") from None
    with os.fdopen(descriptor, "wb") as opened:
        opened.write(signing_keys.make())
    click.echo(public_text(_read(file)))


@key.command()
@click.argument("file", type=FILE)
def show(file: Path) -> None:
    """Print the public key of FILE, to be handed to whoever checks checkpoints."""
    click.echo(public_text(_read(file)))


@key.command()
@click.option("--old", "old_file", type=FILE, help="The key that signs now.")
@click.option("--old-is-lost", is_flag=True, help="There is no --old any more; every verification says so.")
@click.option("--new", "new_file", type=FILE, required=True, help="The key that signs from now on.")
@click.option("--reason", required=True, help="Why, for the history.")
def change(old_file: Path | None, old_is_lost: bool, new_file: Path, reason: str) -> None:
    """Put another key in the present one's place, by an entry that both sign.

    Then set GAIN_SIGNOFF_SIGNING_KEY_FILE to the new file and start the service again.
    """
    if (old_file is None) != old_is_lost:
        raise UserMistake("either --old or --old-is-lost is wanted")
    previous = None if old_file is None else _read(old_file)
    new = _read(new_file)
    with store.writing() as visit:
        signing_keys.change(visit.session, CONSOLE, previous=previous, new=new, reason=reason, now=visit.now)
    click.echo(f"Checkpoints are signed with {public_text(new)} from now on.")


def _read(file: Path) -> SigningKey:
    try:
        return checkpoints.read_key(file)
    except UnusableKey as refused:
        raise UserMistake(str(refused)) from None
