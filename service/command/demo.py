"""`gain-signoff demo`: an invented plant with a year of changes, to look at and to try things on."""

from __future__ import annotations

import secrets
import shutil
import sys
import tempfile
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import replace
from pathlib import Path

import click
from sqlalchemy import make_url

from service.app import create_app
from service.command.errors import UserMistake
from service.command.serving import listen, serve_until_told
from service.demonstration.plant import Change, Person, invented_plant
from service.demonstration.store import Demonstration, fill
from service.issuing import checkpoints, signing_keys
from service.issuing.base64_text import public_text
from service.records.database import system_clock
from service.records.errors import StoreNotUsable
from service.settings import DEFAULT_DATABASE_URL, Settings

HOST = "127.0.0.1"


@click.command()
@click.option(
    "--port", default=8000, show_default=True, type=click.IntRange(0, 65535), help="0 takes a free one."
)
@click.option("--only-data", is_flag=True, help="Make the data and end.")
def demo(port: int, only_data: bool) -> None:
    """Show the service on an invented plant with a year of changes.

    The data go to a fresh SQLite store in a temporary folder, which is removed at the end; or, where
    GAIN_SIGNOFF_DATABASE_URL names an empty store, there, where they stay.
    """
    if only_data:
        with _store(keep=True) as settings:
            _describe(_fill(settings), settings)
        return
    # a port that is taken is told before the year is made, not after it
    with closing(listen(HOST, port)) as listener, _store(keep=False) as settings:
        _describe(_fill(settings), settings)
        serve_until_told(create_app(settings), listener, on_ready=_announce)


@contextmanager
def _store(keep: bool) -> Iterator[Settings]:
    """The store named in the environment, or one in a new temporary folder with a signing key of its own.

    The secret key is made here.
    """
    settings = replace(Settings.from_environment(), secret_key=secrets.token_hex(32))
    if settings.database_url != DEFAULT_DATABASE_URL:
        yield settings
        return
    folder = Path(tempfile.mkdtemp(prefix="gain-signoff-demonstration-"))
    key = folder / "signing.pem"
    key.write_bytes(signing_keys.make())
    try:
        yield replace(settings, database_url=f"sqlite:///{folder / 'gain-signoff.db'}", signing_key_file=key)
    finally:
        if not keep:
            shutil.rmtree(folder)


def _fill(settings: Settings) -> Demonstration:
    changes = len(invented_plant().year)
    with click.progressbar(length=changes, label="A year of changes", file=sys.stderr) as bar:

        def step(_change: Change) -> None:
            bar.update(1)

        try:
            return fill(settings, system_clock(), step)
        except StoreNotUsable as refused:
            raise UserMistake(f"{refused.detail}; the demonstration needs an empty store") from None


def _describe(demonstration: Demonstration, settings: Settings) -> None:
    people = demonstration.plant.people
    click.echo("Demonstration of the gain sign-off service. Plant, people and figures are invented.\n")
    click.echo(f"Store: {make_url(settings.database_url)!r}")  # a password in it is not shown
    click.echo(f"Checkpoints of the history: {_signed(settings.signing_key_file)}\n")
    widths = max(len(person.name) for person in people), max(len(person.password) for person in people)
    for person in people:
        click.echo(f"  {person.name:{widths[0]}}  {person.password:{widths[1]}}  {_who(person)}")
    click.echo("\nTokens for programs (Authorization: Bearer TOKEN):\n")
    for name, token in demonstration.tokens.items():
        click.echo(f"  {name:{widths[0]}}  {token}")


def _signed(key: Path | None) -> str:
    return f"signed with {public_text(checkpoints.read_key(key))}" if key else "unsigned, for want of a key"


def _who(person: Person) -> str:
    areas = ", ".join(person.areas) or "every area"
    return f"{person.full_name}, {' and '.join(person.roles)} ({areas}): {person.about}"


def _announce(address: str) -> None:
    click.echo(f"\nOpen {address} and sign in with a name and password from above. Ctrl+C ends it.")
