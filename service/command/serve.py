"""`gain-signoff serve`."""

from __future__ import annotations

import logging

import click

from service.app import create_app
from service.command.errors import UserMistake
from service.command.serving import serve_until_told
from service.command.store import mistakes_in_a_sentence, reading
from service.issuing.checkpoints import UnusableKey
from service.records import migrating
from service.settings import Settings, SettingsError


@click.command()
@click.option("--host", default="127.0.0.1", show_default=True, help="The address to listen at.")
@click.option("--port", default=8000, show_default=True, type=click.IntRange(0, 65535), help="0: any free.")
def serve(host: str, port: int) -> None:
    """Run the service until it is told to end (SIGTERM or SIGINT); requests that were begun are finished."""
    logging.basicConfig(level=logging.INFO, format="%(asctime)s %(levelname)s %(name)s %(message)s")
    settings = Settings.from_environment()
    try:
        with mistakes_in_a_sentence():
            app = create_app(settings)
    except (SettingsError, UnusableKey) as refused:
        raise UserMistake(str(refused)) from None
    _check_schema()
    serve_until_told(app, host, port, lambda address: click.echo(f"Serving at {address}"))


def _check_schema() -> None:
    with reading() as visit:
        if not migrating.is_current(visit.session):
            raise UserMistake("the database is not at the current schema; run gain-signoff migrate first")
