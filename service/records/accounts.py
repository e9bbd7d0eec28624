"""People who sign in: accounts with their roles, areas and passwords. Names are never used twice."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime

from sqlalchemy.orm import Session

from service.records.roles import Actor, Role
from service.records.views import AccountView, Page


@dataclass(frozen=True, kw_only=True, slots=True)
class NewAccount:
    """An account to be added."""

    name: str
    full_name: str
    roles: tuple[Role, ...]
    password: str = field(repr=False)
    areas: tuple[str, ...] = ()
    """Areas that it sees; none stands for all."""


def add(session: Session, actor: Actor, new: NewAccount, now: datetime) -> AccountView:
    """Add an account. Raises NotAllowed, FieldErrors, AlreadyExists."""
    raise NotImplementedError


def find(session: Session, actor: Actor, name: str) -> AccountView:
    """One account by its name; anyone sees their own, administrators and auditors see all.

    Raises NotFound.
    """
    raise NotImplementedError


def accounts(session: Session, actor: Actor, after: str | None = None, limit: int = 50) -> Page[AccountView]:
    """Accounts by name. Raises NotAllowed."""
    raise NotImplementedError


def change_access(
    session: Session,
    actor: Actor,
    name: str,
    roles: tuple[Role, ...],
    areas: tuple[str, ...],
    reason: str,
    now: datetime,
) -> AccountView:
    """Give an account other roles and areas; they hold from its next request on."""
    raise NotImplementedError


def rename(
    session: Session, actor: Actor, name: str, full_name: str, reason: str, now: datetime
) -> AccountView:
    """Change the full name; earlier signatures keep the one they were made with."""
    raise NotImplementedError


def close(session: Session, actor: Actor, name: str, reason: str, now: datetime) -> AccountView:
    """Close an account, its tokens and its sessions. Its name stays taken."""
    raise NotImplementedError


def change_password(session: Session, actor: Actor, password: str, new_password: str, now: datetime) -> None:
    """Change one's own password and end one's other sessions. Raises WrongPassword, FieldErrors."""
    raise NotImplementedError


def reset_password(
    session: Session, actor: Actor, name: str, new_password: str, reason: str, now: datetime
) -> None:
    """Set another's password. Until a second administrator confirms, that account signs nothing."""
    raise NotImplementedError


def confirm_reset(session: Session, actor: Actor, name: str, reason: str, now: datetime) -> None:
    """Confirm a reset as a second administrator.

    Raises NotIndependent to the one who reset it or whose it is.
    """
    raise NotImplementedError


def check_password(session: Session, actor: Actor, password: str, now: datetime) -> None:
    """Check the password that signs. Raises TooManyAttempts, SigningSuspended or WrongPassword."""
    raise NotImplementedError


def actor_of(session: Session, account_id: str) -> Actor:
    """The account as an actor, read now. Raises NotAuthenticated where it is closed or unknown."""
    raise NotImplementedError
