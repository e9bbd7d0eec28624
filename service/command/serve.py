"""`gain-signoff serve`."""

from __future__ import annotations

import logging

import click

from service.app import create_app
from service.command import store
from service.command.errors import UserMistake
from service.command.serving import listen, serve_until_told
from service.issuing.checkpoints import UnusableKey
from service.settings import Settings, SettingsError


@click.command()
@click.option("--host", default="127.0.0.1", show_default=True, help="The address to listen at.")
@click.option("--port", default=8000, show_default=True, type=click.IntRange(0, 65535), help="0: any free.")
def serve(host: str, port: int) -> None:
    """Run the service until it is told to end (SIGTERM or SIGINT); requests that were begun are finished."""
    if store.may_change_what_is_kept():
        click.echo(
            "Note: this database role may change what is kept; see PostgreSQL in the README for another one.",
            err=True,
        )
    try:
        with store.mistakes_in_a_sentence():
            app = create_app(Settings.from_environment())
    except (SettingsError, UnusableKey) as refused:
        raise UserMistake(str(refused)) from None
    _log_to_standard_error()
    serve_until_told(app, listen(host, port), lambda address: click.echo(f"Serving at {address}"))


def _log_to_standard_error() -> None:
    logging.basicConfig(level=logging.INFO, format="%(asctime)s %(levelname)s %(name)s %(message)s")
    # it tells of every look at the schema, and /readyz looks often
    logging.getLogger("alembic").setLevel(logging.WARNING)
