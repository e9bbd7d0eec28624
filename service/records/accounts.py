"""People who sign in: accounts with their roles, areas and passwords. Names are never used twice."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from uuid import uuid4

from sqlalchemy import bindparam, func, select, update
from sqlalchemy.orm import Session, lazyload

from service.documents.errors import FieldProblem
from service.records import history, passwords, throttles
from service.records.errors import (
    AlreadyExists,
    Conflict,
    FieldErrors,
    NotAllowed,
    NotAuthenticated,
    NotFound,
    NotIndependent,
    SigningRefused,
    SigningSuspended,
    WrongPassword,
)
from service.records.event_kinds import EventKind
from service.records.roles import CONSOLE_NAME, ROLES, Actor, Role, require_role
from service.records.tables.accounts import Account, AccountArea, AccountRole, SignInSession, Token
from service.records.views import AccountView, Page

NAME_PATTERN = re.compile(r"[a-z0-9](?:[a-z0-9._-]{0,38}[a-z0-9])?")
"""Plain ASCII in lower case, so that no two names look alike."""

FULL_NAME_CHARACTERS_MAX = 100
REASON_CHARACTERS_MAX = 1000
UNUSED_AFTER = timedelta(days=90)

_ALONE = select(Account).options(lazyload("*")).where(Account.id == bindparam("account_id"))
"""An account without its roles and areas."""


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
    require_role(actor, "administrator")
    _refuse(
        _name_problem(new.name),
        _text_problem(new.full_name, "/full_name", FULL_NAME_CHARACTERS_MAX),
        *_access_problems(new.roles, new.areas),
        passwords.problem(new.password, "/new_password"),
    )
    if new.name == CONSOLE_NAME or _row(session, new.name) is not None:
        raise AlreadyExists(f"the name {new.name} is taken; names are never used twice")
    account = Account(
        id=uuid4().hex,
        name=new.name,
        full_name=new.full_name,
        password_hash=passwords.hashed(passwords.hasher_of(session), new.password),
        created_at=now,
    )
    _set_access(account, new.roles, new.areas)
    session.add(account)
    session.flush()
    told = {"full_name": account.full_name} | _access(account)
    _tell(session, actor, "account_added", account, now, told)
    return _view(account)


def find(session: Session, actor: Actor, name: str) -> AccountView:
    """One account by its name; anyone sees their own, administrators and auditors see all.

    Raises NotFound.
    """
    account = _row(session, name)
    if account is None or (name != actor.name and actor.roles.isdisjoint(("administrator", "auditor"))):
        raise NotFound("there is no such account")
    return _view(account)


def accounts(session: Session, actor: Actor, after: str | None = None, limit: int = 50) -> Page[AccountView]:
    """Accounts by name. Raises NotAllowed."""
    require_role(actor, "administrator", "auditor")
    query = select(Account).order_by(Account.name).limit(limit + 1)
    if after is not None:
        query = query.where(Account.name > after)
    rows = session.execute(query).scalars().all()
    more = len(rows) > limit
    return Page(items=tuple(map(_view, rows[:limit])), after=rows[limit - 1].name if more else None)


def unused(session: Session, actor: Actor, now: datetime) -> tuple[AccountView, ...]:
    """Open accounts that nobody has used for 90 days, by name: whoever left should not keep a way in.

    Raises NotAllowed.
    """
    require_role(actor, "administrator", "auditor")
    query = select(Account).where(
        Account.closed_at.is_(None),
        func.coalesce(Account.last_used_at, Account.created_at) < now - UNUSED_AFTER,
    )
    return tuple(map(_view, session.execute(query.order_by(Account.name)).scalars()))


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
    account = _changeable(session, actor, name, reason, *_access_problems(roles, areas))
    before = _access(account)
    _set_access(account, roles, areas)
    session.flush()
    told = {"reason": reason, "before": before} | _access(account)
    _tell(session, actor, "account_access_changed", account, now, told)
    return _view(account)


def rename(
    session: Session, actor: Actor, name: str, full_name: str, reason: str, now: datetime
) -> AccountView:
    """Change the full name; earlier signatures keep the one they were made with."""
    problem = _text_problem(full_name, "/full_name", FULL_NAME_CHARACTERS_MAX)
    account = _changeable(session, actor, name, reason, problem)
    before, account.full_name = account.full_name, full_name
    session.flush()
    told = {"reason": reason, "before": before, "full_name": full_name}
    _tell(session, actor, "account_renamed", account, now, told)
    return _view(account)


def close(session: Session, actor: Actor, name: str, reason: str, now: datetime) -> AccountView:
    """Close an account, its tokens and its sessions. Its name stays taken."""
    account = _changeable(session, actor, name, reason)
    account.closed_at = now
    session.execute(
        update(Token).where(Token.account_id == account.id, Token.revoked_at.is_(None)).values(revoked_at=now)
    )
    _end_sessions(session, account, now)
    session.flush()
    _tell(session, actor, "account_closed", account, now, {"reason": reason})
    return _view(account)


def change_password(session: Session, actor: Actor, password: str, new_password: str, now: datetime) -> None:
    """Change one's own password and end all one's sessions. Raises WrongPassword, FieldErrors."""
    account = _own(session, actor)
    _check(session, account, password, now)
    throttles.forget(session, throttles.of_account(account.name))
    _set_password(session, account, new_password, now)
    _tell(session, actor, "password_changed", account, now, {})


def record_refused_password(session: Session, actor: Actor, refusal: SigningRefused, now: datetime) -> None:
    """Leave the trace of a change of password that was refused, and count a wrong password.

    In a transaction of its own, after what was begun has been rolled back.
    """
    account = _own(session, actor)
    if isinstance(refusal, WrongPassword):
        throttles.count(session, throttles.of_account(account.name), now)
    _tell(session, actor, "password_change_refused", account, now, {"reason": refusal.detail})


def reset_password(
    session: Session, actor: Actor, name: str, new_password: str, reason: str, now: datetime
) -> None:
    """Set another's password.

    Until a second administrator confirms it, that account signs nothing: whoever knows the new password could
    sign as somebody else.
    """
    account = _changeable(session, actor, name, reason)
    if actor.account_id == account.id:
        raise NotAllowed("one's own password is changed with the old one, not reset")
    _set_password(session, account, new_password, now)
    # a reset from the console is confirmed by any administrator but the account's own
    account.reset_by = actor.account_id or account.id
    session.flush()
    _tell(session, actor, "password_reset", account, now, {"reason": reason})


def confirm_reset(session: Session, actor: Actor, name: str, reason: str, now: datetime) -> None:
    """Confirm a reset as a second administrator.

    Raises NotIndependent for whoever reset it and for the account itself, Conflict where nothing was reset.
    """
    account = _changeable(session, actor, name, reason)
    if account.reset_by is None:
        raise Conflict("there is no reset to confirm")
    if actor.account_id in (None, account.reset_by, account.id):
        raise NotIndependent("a reset is confirmed by a second administrator, who signs in by name")
    account.reset_by = None
    session.flush()
    _tell(session, actor, "password_reset_confirmed", account, now, {"reason": reason})


def check_password(session: Session, actor: Actor, password: str, now: datetime) -> None:
    """Check the password that signs. Raises TooManyAttempts, SigningSuspended or WrongPassword."""
    account = _own(session, actor)
    if account.reset_by is not None:
        raise SigningSuspended("the password was reset, and a second administrator has not confirmed it yet")
    _check(session, account, password, now)


def actor_of(session: Session, account_id: str) -> Actor:
    """Return the account as an actor, read now. Raises NotAuthenticated where it is closed or unknown."""
    account = session.get(Account, account_id)
    if account is None or account.closed_at is not None:
        raise NotAuthenticated("sign in again")
    return Actor(
        account_id=account.id,
        name=account.name,
        full_name=account.full_name,
        roles=frozenset(role.role for role in account.roles),  # type: ignore[misc]  # by the table's constraint
        areas=frozenset(area.area for area in account.areas),
    )


def _row(session: Session, name: str) -> Account | None:
    return session.execute(select(Account).where(Account.name == name)).scalar_one_or_none()


def _own(session: Session, actor: Actor) -> Account:
    account = session.execute(_ALONE, {"account_id": actor.account_id}).scalar_one_or_none()
    if account is None:
        raise WrongPassword("only a person's own account signs")
    return account


def _changeable(
    session: Session, actor: Actor, name: str, reason: str, *problems: FieldProblem | None
) -> Account:
    require_role(actor, "administrator")
    account = _row(session, name)
    if account is None:
        raise NotFound("there is no such account")
    _refuse(_text_problem(reason, "/reason", REASON_CHARACTERS_MAX), *problems)
    if account.closed_at is not None:
        raise Conflict("the account is closed")
    return account


def _check(session: Session, account: Account, password: str, now: datetime) -> None:
    throttles.check(session, throttles.of_account(account.name), now)
    if not passwords.verified(passwords.hasher_of(session), account.password_hash, password):
        raise WrongPassword("the password is wrong")


def _set_password(session: Session, account: Account, new_password: str, now: datetime) -> None:
    _refuse(passwords.problem(new_password, "/new_password"))
    account.password_hash = passwords.hashed(passwords.hasher_of(session), new_password)
    _end_sessions(session, account, now)
    session.flush()


def _end_sessions(session: Session, account: Account, now: datetime) -> None:
    session.execute(
        update(SignInSession)
        .where(SignInSession.account_id == account.id, SignInSession.ended_at.is_(None))
        .values(ended_at=now)
    )


def _set_access(account: Account, roles: tuple[Role, ...], areas: tuple[str, ...]) -> None:
    account.roles = [AccountRole(role=role) for role in sorted(set(roles))]
    account.areas = [AccountArea(area=area) for area in sorted(set(areas))]


def _access(account: Account) -> dict[str, list[str]]:
    return {
        "roles": sorted(role.role for role in account.roles),
        "areas": sorted(area.area for area in account.areas),
    }


def _tell(
    session: Session,
    actor: Actor,
    kind: EventKind,
    account: Account,
    now: datetime,
    told: Mapping[str, object],
) -> None:
    content = {"account": account.name} | dict(told)
    history.append(session, kind=kind, actor=actor, content=content, now=now)


def _refuse(*problems: FieldProblem | None) -> None:
    found = tuple(problem for problem in problems if problem is not None)
    if found:
        raise FieldErrors(found)


def _name_problem(name: str) -> FieldProblem | None:
    if NAME_PATTERN.fullmatch(name):
        return None
    return FieldProblem(
        "/name",
        "a name has 1 to 40 characters: a to z, 0 to 9, and inside it dots, hyphens and underscores",
    )


def _text_problem(text: str, pointer: str, characters_max: int) -> FieldProblem | None:
    if not text.strip() or len(text) > characters_max:
        return FieldProblem(pointer, f"1 to {characters_max} characters are wanted")
    if any(unicodedata.category(character) in ("Cc", "Cf", "Cs", "Co", "Cn") for character in text):
        return FieldProblem(pointer, "a text has no invisible or control characters")
    return None


def _access_problems(roles: tuple[Role, ...], areas: tuple[str, ...]) -> tuple[FieldProblem | None, ...]:
    unknown = sorted(set(roles) - set(ROLES))
    return (
        FieldProblem("/roles", "at least one role is wanted") if not roles else None,
        FieldProblem("/roles", f"there is no role {unknown[0]}") if unknown else None,
        *(_text_problem(area, f"/areas/{index}", 200) for index, area in enumerate(areas)),
    )


def _view(account: Account) -> AccountView:
    access = _access(account)
    return AccountView(
        id=account.id,
        name=account.name,
        full_name=account.full_name,
        roles=tuple(access["roles"]),  # type: ignore[arg-type]  # by the table's constraint
        areas=tuple(access["areas"]),
        created_at=account.created_at,
        closed_at=account.closed_at,
        last_used_at=account.last_used_at,
        signing_suspended=account.reset_by is not None,
    )
