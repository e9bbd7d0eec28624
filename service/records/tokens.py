"""Bearer tokens of tools: an id and 32 random bytes, of which only the SHA-256 is kept."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from service.records.roles import Actor
from service.records.views import TokenView


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
    raise NotImplementedError


def tokens(session: Session, actor: Actor, account_name: str | None = None) -> tuple[TokenView, ...]:
    """Tokens of one account or, for an administrator, of all."""
    raise NotImplementedError


def revoke(session: Session, actor: Actor, token_id: str, reason: str, now: datetime) -> TokenView:
    """Revoke a token, one's own or, as an administrator, any."""
    raise NotImplementedError


def authenticate(session: Session, text: str, now: datetime) -> Authenticated:
    """The account behind a token's text, compared in constant time. Raises NotAuthenticated. Reads only."""
    raise NotImplementedError


def note_use(session: Session, token_id: str, now: datetime) -> None:
    """Note that a token was used, outside the history; asked for at most once an hour."""
    raise NotImplementedError
