"""What a request needs of the running service, set once when the application is assembled.

Lives here: the one object that api and pages share, and the request's identifier. May import: flask, the
records, cryptography for the type of a key. Must never know: JSON, HTML, the environment.
"""

from __future__ import annotations

import uuid
from dataclasses import dataclass, field

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from flask import Flask, current_app, g

from service.records.database import Database

_EXTENSION = "gain-signoff"


@dataclass(frozen=True, kw_only=True)
class Services:
    """What the running service works with. The time is the database's: `database.now()`."""

    database: Database
    secret_key: str = field(repr=False)
    signing_key: Ed25519PrivateKey | None = field(default=None, repr=False)
    """Signs checkpoints of the history; None: they are unsigned and say so."""


def attach(app: Flask, services: Services) -> None:
    """Make `services` those of the application's requests."""
    app.extensions[_EXTENSION] = services


def services() -> Services:
    """Return the services of the application that handles the present request."""
    return services_of(current_app)


def services_of(app: Flask) -> Services:
    """Return the services of an application, outside its requests."""
    attached: Services = app.extensions[_EXTENSION]
    return attached


def note_account(name: str) -> None:
    """Note whose credential the present request came with, for the log."""
    g.account = name


def account() -> str | None:
    """Return the name of the account whose credential the present request came with, if it came with one."""
    name: str | None = g.get("account")
    return name


def note_problem(name: str) -> None:
    """Note which type of problem the present request is answered with, for the log."""
    g.problem = name


def problem() -> str | None:
    """Return the type of problem that the present request is answered with, None where there is none."""
    name: str | None = g.get("problem")
    return name


def request_id() -> str:
    """Return the identifier of the present request: a UUID made here, never taken from a header."""
    if "request_id" not in g:
        g.request_id = str(uuid.uuid4())
    identifier: str = g.request_id
    return identifier
