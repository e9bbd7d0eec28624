"""Bearer tokens of tools: an id and 32 random bytes, of which only the SHA-256 is kept."""

from __future__ import annotations

import hashlib
import secrets
from dataclasses import dataclass
from datetime import datetime, timedelta
from uuid import uuid4

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.documents.errors import FieldProblem
from service.records import accounts, history
from service.records.errors import Conflict, FieldErrors, NotAuthenticated, NotFound
from service.records.roles import Actor, require_role
from service.records.tables.accounts import Account, Token
from service.records.views import TokenView

SECRET_BYTES = 32
NOTE_CHARACTERS_MAX = 200
USE_NOTED_EVERY = timedelta(hours=1)


@dataclass(frozen=True, kw_only=True, slots=True)
class Authenticated:
    """Whose token it is. `use_is_due`: its last use was noted more than an hour ago, see `note_use`."""

    actor: Actor
    token_id: str
    use_is_due: bool


def issue(
    session: Session, actor: Actor, account_name: str, note: str, now: datetime
) -> tuple[TokenView, str]:
    """Issue a token for an account; its text, returned beside it, is shown once and not kept."""
    require_role(actor, "administrator")
    account = session.execute(select(Account).where(Account.name == account_name)).scalar_one_or_none()
    if account is None:
        raise NotFound("there is no such account")
    if not note.strip() or len(note) > NOTE_CHARACTERS_MAX:
        raise FieldErrors((FieldProblem("/note", f"1 to {NOTE_CHARACTERS_MAX} characters are wanted"),))
    if account.closed_at is not None:
        raise Conflict("the account is closed")
    secret = secrets.token_bytes(SECRET_BYTES)
    token = Token(
        id=uuid4().hex, account_id=account.id, secret_sha256=_hash(secret), note=note, issued_at=now
    )
    session.add(token)
    session.flush()
    content = {"account": account.name, "token": token.id, "note": note}
    history.append(session, kind="token_issued", actor=actor, content=content, now=now)
    return _view(token, account.name), f"{token.id}.{secret.hex()}"


def tokens(session: Session, actor: Actor, account_name: str | None = None) -> tuple[TokenView, ...]:
    """Tokens of one account or of all, by account and time of issue.

    Raises NotAllowed for others' tokens unless the actor is an administrator or an auditor.
    """
    if account_name != actor.name:
        require_role(actor, "administrator", "auditor")
    query = select(Token, Account.name).join(Account).order_by(Account.name, Token.issued_at, Token.id)
    if account_name is not None:
        query = query.where(Account.name == account_name)
    return tuple(_view(token, name) for token, name in session.execute(query))


def check_may_revoke(session: Session, actor: Actor, token_id: str) -> None:
    """Raise NotFound for whoever neither owns the token nor is an administrator."""
    _found(session, actor, token_id)


def revoke(session: Session, actor: Actor, token_id: str, reason: str, now: datetime) -> TokenView:
    """Revoke a token, one's own or, as an administrator, any. Raises NotFound, FieldErrors, Conflict."""
    token, account_name = _found(session, actor, token_id)
    if not reason.strip() or len(reason) > accounts.REASON_CHARACTERS_MAX:
        raise FieldErrors((FieldProblem("/reason", "a reason is wanted"),))
    if token.revoked_at is not None:
        raise Conflict("the token is revoked already")
    token.revoked_at = now
    session.flush()
    content = {"account": account_name, "token": token.id, "note": token.note, "reason": reason}
    history.append(session, kind="token_revoked", actor=actor, content=content, now=now)
    return _view(token, account_name)


def authenticate(session: Session, text: str, now: datetime) -> Authenticated:
    """Find the account behind a token's text, compared in constant time.

    Raises NotAuthenticated. Reads only.
    """
    token_id, _, secret_text = text.partition(".")
    token = session.get(Token, token_id)
    try:
        secret = bytes.fromhex(secret_text)
    except ValueError:
        secret = b""
    kept = b"\0" * 32 if token is None else token.secret_sha256
    same = secrets.compare_digest(_hash(secret), kept)
    if not same or token is None or token.revoked_at is not None:
        raise NotAuthenticated("the token is not valid")
    due = token.last_used_at is None or now - token.last_used_at >= USE_NOTED_EVERY
    actor = accounts.actor_of(session, token.account_id)
    return Authenticated(actor=actor, token_id=token.id, use_is_due=due)


def note_use(session: Session, token_id: str, now: datetime) -> None:
    """Note that a token was used, outside the history; asked for at most once an hour."""
    token = session.get_one(Token, token_id)
    token.last_used_at = now
    session.get_one(Account, token.account_id).last_used_at = now
    session.flush()


def _found(session: Session, actor: Actor, token_id: str) -> tuple[Token, str]:
    found = session.execute(
        select(Token, Account.name).join(Account).where(Token.id == token_id)
    ).one_or_none()
    if found is None or (found[1] != actor.name and "administrator" not in actor.roles):
        raise NotFound("there is no such token")
    token, account_name = found
    return token, account_name


def _hash(secret: bytes) -> bytes:
    # 256 random bits need no slow hash
    return hashlib.sha256(secret).digest()


def _view(token: Token, account_name: str) -> TokenView:
    return TokenView(
        id=token.id,
        account_name=account_name,
        note=token.note,
        issued_at=token.issued_at,
        revoked_at=token.revoked_at,
        last_used_at=token.last_used_at,
    )
