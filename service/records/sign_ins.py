"""Signing in with name and password: sessions kept here, so that they can be ended, and a throttle."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta

from sqlalchemy.orm import Session

from service.records.database import Database
from service.records.roles import Actor

IDLE_LIMIT = timedelta(minutes=30)
ABSOLUTE_LIMIT = timedelta(hours=12)
"""A shift. Common practice."""


@dataclass(frozen=True, kw_only=True, slots=True)
class StartedSession:
    """A session that has just begun. `secret` goes into the cookie and is not kept."""

    secret: str
    actor: Actor
    ends_at: datetime


@dataclass(frozen=True, kw_only=True, slots=True)
class PresentSession:
    """A session that goes on. `use_is_due`: note its use, see `note_use`."""

    id: str
    actor: Actor
    csrf_secret: bytes
    """32 random bytes from which the forms' tokens are made."""
    use_is_due: bool


def sign_in(database: Database, name: str, password: str, source: str) -> StartedSession:
    """Sign in. Owns its transactions, since the attempt is counted before the password is looked at.

    `source` is where the request comes from (an address). Raises TooManyAttempts or NotAuthenticated; a
    failure is counted and leaves an entry in the history, and looks and lasts the same for known and unknown
    names.
    """
    raise NotImplementedError


def resume(session: Session, secret: str, now: datetime) -> PresentSession:
    """The session behind a cookie. Raises NotAuthenticated where it is unknown, ended or over. Reads only."""
    raise NotImplementedError


def note_use(session: Session, session_id: str, now: datetime) -> None:
    """Note that a session is in use, so that its idle limit moves; asked for at most once a minute."""
    raise NotImplementedError


def sign_out(session: Session, session_id: str, now: datetime) -> None:
    """End a session."""
    raise NotImplementedError
