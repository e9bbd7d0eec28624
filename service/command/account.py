"""`gain-signoff account`: people who may use the service."""

from __future__ import annotations

import sys

import click

from service.command import store
from service.command.errors import UserMistake
from service.records import accounts
from service.records.accounts import NewAccount
from service.records.roles import CONSOLE, ROLES, Role


@click.group()
def account() -> None:
    """Make accounts."""


@account.command()
@click.argument("name")
@click.option("--full-name", required=True, help="The name that stands beside signatures.")
@click.option(
    "--role", "roles", type=click.Choice(ROLES), multiple=True, required=True, help="Once or several times."
)
@click.option("--area", "areas", multiple=True, help="An area that the account sees; without any: all.")
def add(name: str, full_name: str, roles: tuple[Role, ...], areas: tuple[str, ...]) -> None:
    """Add an account. The first line of standard input is its password."""
    new = NewAccount(name=name, full_name=full_name, roles=roles, areas=areas, password=_password())
    with store.writing() as visit:
        added = accounts.add(visit.session, CONSOLE, new, visit.now)
    click.echo(f"Added {added.name} ({added.full_name}): {', '.join(added.roles)}.")


def _password() -> str:
    if sys.stdin.isatty():
        asked: str = click.prompt("Password", hide_input=True, confirmation_prompt=True, err=True)
        return asked
    line = sys.stdin.readline().removesuffix("\n").removesuffix("\r")
    if not line:
        raise UserMistake("the first line of standard input is the password, and there was none")
    return line
