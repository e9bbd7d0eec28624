"""`gain-signoff account`: people who may use the service."""

from __future__ import annotations

import sys

import click

from service.command import store
from service.command.errors import UserMistake
from service.command.store import Visit
from service.records import accounts
from service.records.accounts import NewAccount
from service.records.roles import CONSOLE, ROLES, Role
from service.records.views import AccountView

ACCOUNTS_AT_A_TIME = 200


@click.group()
def account() -> None:
    """Make accounts and look after them."""


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


@account.command("list")
@click.option("--unused", is_flag=True, help="Only open accounts that nobody has used for 90 days.")
def list_accounts(unused: bool) -> None:
    """List accounts by name; one a line, parted by tabs."""
    with store.reading() as visit:
        found = accounts.unused(visit.session, CONSOLE, visit.now) if unused else _all(visit)
    for each in found:
        areas = ", ".join(each.areas) or "every area"
        used = f"used {each.last_used_at:%Y-%m-%d}" if each.last_used_at else "never used"
        click.echo("\t".join((each.name, each.full_name, ", ".join(each.roles), areas, _state(each), used)))


@account.command()
@click.argument("name")
@click.option(
    "--role", "roles", type=click.Choice(ROLES), multiple=True, required=True, help="Once or several times."
)
@click.option("--area", "areas", multiple=True, help="An area that the account sees; without any: all.")
@click.option("--reason", required=True, help="Why, for the history.")
def access(name: str, roles: tuple[Role, ...], areas: tuple[str, ...], reason: str) -> None:
    """Give the account NAME these roles and areas in place of those that it has."""
    with store.writing() as visit:
        changed = accounts.change_access(visit.session, CONSOLE, name, roles, areas, reason, visit.now)
    told = ", ".join(changed.areas) or "every area"
    click.echo(f"{changed.name} is {', '.join(changed.roles)} in {told}.")


@account.command()
@click.argument("name")
@click.option("--full-name", required=True, help="Earlier signatures keep the one they were made with.")
@click.option("--reason", required=True, help="Why, for the history.")
def rename(name: str, full_name: str, reason: str) -> None:
    """Change the full name of the account NAME."""
    with store.writing() as visit:
        changed = accounts.rename(visit.session, CONSOLE, name, full_name, reason, visit.now)
    click.echo(f"{changed.name} is {changed.full_name}.")


@account.command()
@click.argument("name")
@click.option("--reason", required=True, help="Why, for the history.")
def close(name: str, reason: str) -> None:
    """Close the account NAME with its tokens and sessions. Its name stays taken."""
    with store.writing() as visit:
        closed = accounts.close(visit.session, CONSOLE, name, reason, visit.now)
    click.echo(f"Closed {closed.name}.")


@account.command("reset-password")
@click.argument("name")
@click.option("--reason", required=True, help="Why, for the history.")
def reset_password(name: str, reason: str) -> None:
    """Set another password for the account NAME. The first line of standard input is the password.

    The account signs nothing until an administrator, signed in by name, confirms it over HTTP.
    """
    password = _password()
    with store.writing() as visit:
        accounts.reset_password(visit.session, CONSOLE, name, password, reason, visit.now)
    click.echo(f"Set. {name} signs nothing until an administrator confirms it.")


def _all(visit: Visit) -> tuple[AccountView, ...]:
    found: list[AccountView] = []
    after: str | None = None
    while True:
        page = accounts.accounts(visit.session, CONSOLE, after, ACCOUNTS_AT_A_TIME)
        found.extend(page.items)
        if page.after is None:
            return tuple(found)
        after = page.after


def _state(view: AccountView) -> str:
    if view.closed_at:
        return f"closed {view.closed_at:%Y-%m-%d}"
    return "signs nothing until its reset is confirmed" if view.signing_suspended else "open"


def _password() -> str:
    if sys.stdin.isatty():
        asked: str = click.prompt("Password", hide_input=True, confirmation_prompt=True, err=True)
        return asked
    line = sys.stdin.readline().removesuffix("\n").removesuffix("\r")
    if not line:
        raise UserMistake("the first line of standard input is the password, and there was none")
    return line
