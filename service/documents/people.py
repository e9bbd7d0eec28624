"""The requests by which accounts and tokens are looked after.

`new_password` is always one that is being set; what signs is called `password`, and is no part of these.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Literal

from annotated_types import Len

from service.documents import limits
from service.documents.texts import Line, Prose

Role = Literal["submitter", "reviewer", "auditor", "administrator"]

Secret = Annotated[str, Len(1, limits.PASSWORD_CHARACTERS_MAX)]
Roles = Annotated[tuple[Role, ...], Len(1, 4)]
Areas = Annotated[tuple[Line, ...], Len(0, limits.AREAS_MAX)]
"""None stands for all."""


@dataclass(frozen=True, kw_only=True, slots=True)
class AccountRequest:
    """An account to be added. Its name is never used twice."""

    name: Line
    full_name: Line
    roles: Roles
    new_password: Secret = field(repr=False)
    areas: Areas = ()


@dataclass(frozen=True, kw_only=True, slots=True)
class AccessRequest:
    """The roles and areas that an account has from now on, in place of those that it had."""

    roles: Roles
    areas: Areas
    reason: Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class FullNameRequest:
    """Another full name; earlier signatures keep the one they were made with."""

    full_name: Line
    reason: Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class ReasonRequest:
    """Why something is closed, revoked or confirmed."""

    reason: Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class PasswordResetRequest:
    """A password set by an administrator; the account signs nothing until a second one confirms it."""

    new_password: Secret = field(repr=False)
    reason: Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class PasswordChangeRequest:
    """One's own password, changed with the present one."""

    present_password: Secret = field(repr=False)
    new_password: Secret = field(repr=False)


@dataclass(frozen=True, kw_only=True, slots=True)
class TokenRequest:
    """A token to be issued for an account."""

    account: Line
    note: Line
    """What it is for, as its owner will recognise it."""
