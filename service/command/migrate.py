"""`gain-signoff migrate`."""

from __future__ import annotations

import click

from service.command.store import mistakes_in_a_sentence
from service.records import migrating
from service.records.database import system_clock
from service.settings import Settings


@click.command()
def migrate() -> None:
    """Bring the database to the current schema, or make it where there is none."""
    with mistakes_in_a_sentence():
        migrating.migrate(Settings.from_environment().database_url, now=system_clock())
    click.echo("The database is at the current schema.")
