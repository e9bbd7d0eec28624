"""Signing in with name and password: sessions kept in the store, so that they can be ended, and a
throttle.
"""

from __future__ import annotations

import hashlib
import secrets
from dataclasses import dataclass
from datetime import datetime, timedelta

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.records import accounts, history, passwords, throttles
from service.records.database import Database
from service.records.errors import NotAuthenticated
from service.records.roles import Actor
from service.records.tables.accounts import Account, SignInSession

IDLE_LIMIT = timedelta(minutes=30)
ABSOLUTE_LIMIT = timedelta(hours=12)
"""A shift. Common practice."""

USE_NOTED_EVERY = timedelta(minutes=1)
SECRET_BYTES = 32
NOBODY = "nobody"
"""The actor of a refused sign-in. What was typed as a name may be a password, so it is not written down."""


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
    failure is counted and leaves an entry in the history, and looks and lasts the same for known and
    unknown names.
    """
    subjects = (throttles.of_account(name), throttles.of_source(source))
    with database.writing() as session:
        for subject in subjects:
            throttles.check(session, subject, database.now())
        # counted first: attempts sent at once would otherwise all be looked at before one is counted
        _, of_source = [throttles.count(session, subject, database.now()) for subject in subjects]
    with database.reading() as session:
        # these columns alone: an account's roles would cost two statements more than no account does
        columns = select(Account.id, Account.name, Account.password_hash, Account.closed_at)
        account = session.execute(columns.where(Account.name == name)).one_or_none()
        kept = account.password_hash if account and account.closed_at is None else None
        right = passwords.verified(passwords.hasher_of(session), kept, password)
    with database.writing() as session:
        # looked at again: another password may have been set while this one was compared
        if account is None or not right or session.get_one(Account, account.id).password_hash != kept:
            _leave_trace(session, account.name if account else None, database.now())
        else:
            throttles.forget(session, subjects[0])
            throttles.take_back(session, of_source)
            return _start(session, account.id, database.now())
    raise NotAuthenticated("name or password is wrong")


def resume(session: Session, secret: str, now: datetime) -> PresentSession:
    """Find the session behind a cookie.

    Raises NotAuthenticated where it is unknown, ended or over. Reads only.
    """
    row = session.get(SignInSession, _hash(secret))
    if row is None or row.ended_at is not None:
        raise NotAuthenticated("sign in again")
    if now - row.last_used_at > IDLE_LIMIT or now - row.started_at > ABSOLUTE_LIMIT:
        raise NotAuthenticated("the session is over; sign in again")
    return PresentSession(
        id=row.id,
        actor=accounts.actor_of(session, row.account_id),
        csrf_secret=row.csrf_secret,
        use_is_due=now - row.last_used_at >= USE_NOTED_EVERY,
    )


def note_use(session: Session, session_id: str, now: datetime) -> None:
    """Note that a session is in use, so that its idle limit moves; asked for at most once a minute."""
    row = session.get(SignInSession, session_id)
    if row is not None and row.ended_at is None:
        row.last_used_at = now
        session.flush()


def sign_out(session: Session, session_id: str, now: datetime) -> None:
    """End a session."""
    row = session.get(SignInSession, session_id)
    if row is not None and row.ended_at is None:
        row.ended_at = now
        session.flush()


def _start(session: Session, account_id: str, now: datetime) -> StartedSession:
    secret = secrets.token_urlsafe(SECRET_BYTES)
    session.add(
        SignInSession(
            id=_hash(secret),
            account_id=account_id,
            csrf_secret=secrets.token_bytes(SECRET_BYTES),
            started_at=now,
            last_used_at=now,
        )
    )
    own = session.get_one(Account, account_id)
    own.last_used_at = now
    session.flush()
    actor = accounts.actor_of(session, account_id)
    return StartedSession(secret=secret, actor=actor, ends_at=now + ABSOLUTE_LIMIT)


def _leave_trace(session: Session, account_name: str | None, now: datetime) -> None:
    nobody = Actor(account_id=None, name=NOBODY, full_name="", roles=frozenset())
    content = {"account": account_name}
    history.append(session, kind="sign_in_refused", actor=nobody, content=content, now=now)


def _hash(secret: str) -> str:
    return hashlib.sha256(secret.encode()).hexdigest()
