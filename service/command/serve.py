"""`gain-signoff serve`."""

from __future__ import annotations

import ipaddress
from contextlib import ExitStack

import click

from service.app import create_app
from service.command import metrics, store
from service.command.errors import UserMistake
from service.command.serving import DRAIN_S, listen, serve_until_told
from service.context import services_of
from service.issuing.checkpoints import UnusableKey
from service.monitoring import logs
from service.settings import Settings

PORT = click.IntRange(0, 65535)


def _address(_context: click.Context, _option: click.Parameter, given: str | None) -> str | None:
    """Let an address pass, and not the sign by which the server would trust everybody."""
    try:
        return None if given is None else str(ipaddress.ip_address(given))
    except ValueError:
        raise click.BadParameter(f"{given!r} is no IP address") from None


@click.command()
@click.option("--host", default="127.0.0.1", show_default=True, help="The address to listen at.")
@click.option("--port", default=8000, show_default=True, type=PORT, help="0: any free.")
@click.option(
    "--metrics-port",
    type=PORT,
    help="Serve figures for Prometheus at /metrics of this port, 0: any free. Nobody is asked who they are"
    " there. Without it there are none.",
)
@click.option("--metrics-host", default="127.0.0.1", show_default=True, help="The address of the figures.")
@click.option(
    "--drain",
    "drain_s",
    default=DRAIN_S,
    show_default=True,
    type=click.FloatRange(min=0),
    metavar="SECONDS",
    help="How long requests that were begun may take once the service is told to end.",
)
@click.option(
    "--trusted-proxy",
    metavar="ADDRESS",
    callback=_address,
    help="The address of the proxy before this service: its X-Forwarded-For says where a request comes from."
    " Without it, failed sign-ins of all people count for the one address of the proxy.",
)
def serve(
    host: str,
    port: int,
    metrics_port: int | None,
    metrics_host: str,
    drain_s: float,
    trusted_proxy: str | None,
) -> None:
    """Run the service until it is told to end (SIGTERM or SIGINT); requests that were begun are finished."""
    settings = Settings.from_environment()
    settings.required_secret_key()
    if store.may_change_what_is_kept():
        click.echo(
            "Note: this database role may change what is kept; see PostgreSQL in the README for another one.",
            err=True,
        )
    try:
        with store.mistakes_in_a_sentence():
            app = create_app(settings)
    except UnusableKey as refused:
        raise UserMistake(str(refused)) from None
    logs.to_standard_error(settings.log_level, settings.log_format)
    listener = listen(host, port)
    with ExitStack() as running:
        if metrics_port is not None:
            database = services_of(app).database
            at = running.enter_context(metrics.served(database, metrics_host, metrics_port))
            click.echo(f"Metrics at port {at} of {metrics_host}, path /metrics", err=True)
        serve_until_told(
            app,
            listener,
            lambda address: click.echo(f"Serving at {address}"),
            drain_s=drain_s,
            trusted_proxy=trusted_proxy,
        )
