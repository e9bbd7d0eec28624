"""Accounts with their roles and areas, their passwords, and the tokens of tools."""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import datetime
from typing import Literal

from flask import Blueprint, request

from service.api import answers
from service.api.answers import Answer
from service.api.operations import Call, Reader, Variables, changes, reads
from service.api.preconditions import check_match, content_etag
from service.api.problems import FORBIDDEN
from service.api.queries import NoQuery, PageQuery, Text
from service.documents import writing
from service.documents.people import (
    AccessRequest,
    AccountRequest,
    FullNameRequest,
    PasswordChangeRequest,
    PasswordResetRequest,
    ReasonRequest,
    Role,
    TokenRequest,
)
from service.records import accounts, tokens
from service.records.accounts import NewAccount
from service.records.errors import NotIndependent, SigningRefused
from service.records.roles import require_role
from service.records.views import AccountView, Page, TokenView

blueprint = Blueprint("people", __name__, url_prefix="/v1")


@dataclass(frozen=True, kw_only=True)
class AccountsQuery(PageQuery):
    """`unused`: only open accounts that nobody has used for 90 days."""

    unused: Literal["true", "false"] = "false"


@dataclass(frozen=True, kw_only=True)
class TokensQuery:
    """Whose tokens; left out: everybody's, for administrators and auditors."""

    account: Text | None = None


@dataclass(frozen=True, kw_only=True)
class Account:
    """An account, without anything secret."""

    name: str
    full_name: str
    roles: tuple[Role, ...]
    areas: tuple[str, ...]
    """Those whose loops it sees; an empty list stands for all."""
    created_at: datetime
    closed_at: datetime | None
    last_used_at: datetime | None
    """To the hour."""
    signing_suspended: bool
    """The password was reset by one administrator, and a second one has not confirmed it yet."""

    @classmethod
    def of(cls, view: AccountView) -> Account:
        """Represent an account."""
        return cls(**{name: getattr(view, name) for name in cls.__dataclass_fields__})


@dataclass(frozen=True, kw_only=True)
class Token:
    """A token's entry, without its secret."""

    id: str
    account: str
    note: str
    issued_at: datetime
    revoked_at: datetime | None
    last_used_at: datetime | None
    """To the hour."""

    @classmethod
    def of(cls, view: TokenView) -> Token:
        """Represent a token."""
        return cls(
            id=view.id,
            account=view.account_name,
            note=view.note,
            issued_at=view.issued_at,
            revoked_at=view.revoked_at,
            last_used_at=view.last_used_at,
        )


@dataclass(frozen=True, kw_only=True)
class IssuedToken:
    """A token that has just been issued."""

    entry: Token
    token: str | None
    """What a tool sends. Shown this once and not kept: null when the request is repeated under its key."""


@dataclass(frozen=True, kw_only=True)
class PasswordChanged:
    """One's own password was changed; all one's sessions in a browser are over."""

    account: str


@blueprint.get("/accounts")
@reads(AccountsQuery, Account, a_list=True, refuses=(FORBIDDEN,))
def list_accounts(call: Call, query: AccountsQuery) -> Answer:
    """List accounts by name."""
    if query.unused == "true":
        found = Page(items=accounts.unused(call.session, call.actor, call.now), after=None)
        return answers.page(found, Account.of)
    part = accounts.accounts(call.session, call.actor, answers.after(query), query.limit)
    return answers.page(part, Account.of)


@blueprint.post("/accounts")
@changes(AccountRequest, Account)
def add_account(call: Call, read: Reader[AccountRequest]) -> Answer:
    """Add an account."""
    require_role(call.actor, "administrator")
    document = read()
    new = NewAccount(
        name=document.name,
        full_name=document.full_name,
        roles=document.roles,
        areas=document.areas,
        password=document.new_password,
    )
    return _answer(accounts.add(call.session, call.actor, new, call.now), status=201)


@blueprint.get("/accounts/<name>")
@reads(NoQuery, Account)
def show_account(call: Call, _query: NoQuery, name: str) -> Answer:
    """Show an account, with the ETag that a change has to name."""
    return _answer(accounts.find(call.session, call.actor, name))


@blueprint.put("/accounts/<name>/access")
@changes(AccessRequest, Account, status=200)
def change_access(call: Call, read: Reader[AccessRequest], name: str) -> Answer:
    """Give an account other roles and areas; they hold from its next request on."""
    _check_may_look_after(call, name)
    document = read()
    _check_match(call, name)
    changed = accounts.change_access(
        call.session, call.actor, name, document.roles, document.areas, document.reason, call.now
    )
    return _answer(changed)


@blueprint.put("/accounts/<name>/full-name")
@changes(FullNameRequest, Account, status=200)
def rename_account(call: Call, read: Reader[FullNameRequest], name: str) -> Answer:
    """Change a full name; earlier signatures keep the one they were made with."""
    _check_may_look_after(call, name)
    document = read()
    _check_match(call, name)
    changed = accounts.rename(call.session, call.actor, name, document.full_name, document.reason, call.now)
    return _answer(changed)


@blueprint.post("/accounts/<name>/closures")
@changes(ReasonRequest, Account)
def close_account(call: Call, read: Reader[ReasonRequest], name: str) -> Answer:
    """Close an account with its tokens and sessions. Its name stays taken."""
    _check_may_look_after(call, name)
    return _answer(accounts.close(call.session, call.actor, name, read().reason, call.now), status=201)


@blueprint.post("/accounts/<name>/password-resets")
@changes(PasswordResetRequest, Account)
def reset_password(call: Call, read: Reader[PasswordResetRequest], name: str) -> Answer:
    """Set another's password; that account signs nothing until a second administrator confirms it."""
    _check_may_look_after(call, name)
    document = read()
    accounts.reset_password(call.session, call.actor, name, document.new_password, document.reason, call.now)
    return _answer(accounts.find(call.session, call.actor, name), status=201)


@blueprint.post("/accounts/<name>/password-reset-confirmations")
@changes(ReasonRequest, Account)
def confirm_password_reset(call: Call, read: Reader[ReasonRequest], name: str) -> Answer:
    """Confirm a reset as a second administrator: the account may sign again."""
    _check_may_look_after(call, name)
    accounts.confirm_reset(call.session, call.actor, name, read().reason, call.now)
    return _answer(accounts.find(call.session, call.actor, name), status=201)


def _leave_trace(call: Call, refusal: SigningRefused | NotIndependent, _path: Variables) -> None:
    if isinstance(refusal, SigningRefused):
        accounts.record_refused_password(call.session, call.actor, refusal, call.now)


@blueprint.post("/password-changes")
@changes(PasswordChangeRequest, PasswordChanged, trace=_leave_trace)
def change_password(call: Call, read: Reader[PasswordChangeRequest]) -> Answer:
    """Change one's own password with the present one; all one's sessions in a browser end."""
    document = read()
    accounts.change_password(
        call.session, call.actor, document.present_password, document.new_password, call.now
    )
    shown = PasswordChanged(account=call.actor.name)
    return answers.document(shown, status=201, location=f"/v1/accounts/{call.actor.name}")


@blueprint.get("/tokens")
@reads(TokensQuery, Token, a_list=True, refuses=(FORBIDDEN,))
def list_tokens(call: Call, query: TokensQuery) -> Answer:
    """List the tokens of an account or of all, with their last use."""
    return answers.whole_list(tokens.tokens(call.session, call.actor, query.account), Token.of)


@blueprint.post("/tokens")
@changes(TokenRequest, IssuedToken)
def issue_token(call: Call, read: Reader[TokenRequest]) -> Answer:
    """Issue a token for an account; its text is shown once."""
    require_role(call.actor, "administrator")
    document = read()
    entry, text = tokens.issue(call.session, call.actor, document.account, document.note, call.now)
    made = IssuedToken(entry=Token.of(entry), token=text)
    answer = answers.document(made, status=201, location=f"/v1/tokens?account={entry.account_name}")
    return replace(answer, kept_body=writing.to_bytes(replace(made, token=None)))


@blueprint.post("/tokens/<token_id>/revocations")
@changes(ReasonRequest, Token)
def revoke_token(call: Call, read: Reader[ReasonRequest], token_id: str) -> Answer:
    """Revoke a token, one's own or, as an administrator, any."""
    tokens.check_may_revoke(call.session, call.actor, token_id)
    revoked = tokens.revoke(call.session, call.actor, token_id, read().reason, call.now)
    shown = Token.of(revoked)
    return answers.document(shown, status=201, location=f"/v1/tokens?account={revoked.account_name}")


def _check_may_look_after(call: Call, name: str) -> None:
    """Raise NotFound, or NotAllowed for whoever sees this account and is no administrator."""
    accounts.find(call.session, call.actor, name)
    require_role(call.actor, "administrator")


def _check_match(call: Call, name: str) -> None:
    check_match(request, _etag(accounts.find(call.session, call.actor, name)))


def _etag(view: AccountView) -> str:
    # its use moves by itself, and is nobody's change
    return content_etag(replace(view, last_used_at=None))


def _answer(view: AccountView, status: int = 200) -> Answer:
    location = f"/v1/accounts/{view.name}" if status == 201 else None
    return answers.document(Account.of(view), status=status, location=location, etag=_etag(view))
