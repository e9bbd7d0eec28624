"""`gain-signoff token`: what a tool signs its requests with."""

from __future__ import annotations

import click

from service.command import store
from service.records import tokens
from service.records.roles import CONSOLE


@click.group()
def token() -> None:
    """Issue, list and revoke tokens for the API."""


@token.command()
@click.argument("name")
@click.option("--note", required=True, help="What the token is for, as its owner will recognise it.")
def issue(name: str, note: str) -> None:
    """Issue a token for the account NAME. It is shown this once, alone on standard output."""
    with store.writing() as visit:
        _entry, text = tokens.issue(visit.session, CONSOLE, name, note, visit.now)
    click.echo(text)


@token.command("list")
@click.argument("name", required=False)
def list_tokens(name: str | None) -> None:
    """List the tokens of the account NAME, or of all accounts; one a line, parted by tabs."""
    with store.reading() as visit:
        found = tokens.tokens(visit.session, CONSOLE, name)
    for entry in found:
        state = f"revoked {entry.revoked_at:%Y-%m-%d}" if entry.revoked_at else "valid"
        used = f"used {entry.last_used_at:%Y-%m-%d}" if entry.last_used_at else "never used"
        issued = f"issued {entry.issued_at:%Y-%m-%d}"
        click.echo("\t".join((entry.id, entry.account_name, state, issued, used, entry.note)))


@token.command()
@click.argument("token_id")
@click.option("--reason", required=True, help="Why, for the history.")
def revoke(token_id: str, reason: str) -> None:
    """Revoke a token by its identifier, as `token list` shows it."""
    with store.writing() as visit:
        entry = tokens.revoke(visit.session, CONSOLE, token_id, reason, visit.now)
    click.echo(f"Revoked a token of {entry.account_name}: {entry.note}.")
