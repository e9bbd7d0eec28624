"""`gain-signoff migrate`."""

from __future__ import annotations

import click

from service.command.store import mistakes_in_a_sentence
from service.records import migrating
from service.records.database import system_clock
from service.settings import Settings


@click.command()
@click.option(
    "--service-role",
    help="PostgreSQL: the role that the service runs with. It gets what it needs and can change nothing that"
    " is kept; later migrations remember it.",
)
def migrate(service_role: str | None) -> None:
    """Bring the database to the current schema, or make it where there is none."""
    with mistakes_in_a_sentence():
        url = Settings.from_environment().database_url
        migrating.migrate(url, now=system_clock(), service_role=service_role)
    click.echo("The database is at the current schema.")
