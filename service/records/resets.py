"""Passwords that were reset by one administrator and wait for a second one to confirm it."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.records import accounts
from service.records.errors import NotFound
from service.records.roles import Actor, require_role
from service.records.tables.accounts import Account
from service.records.tables.history import HistoryEvent
from service.records.views import AccountView, EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class ResetView:
    """A reset that nobody has confirmed yet: until then the account signs nothing."""

    account: AccountView
    reset_by: str
    """Account name of whoever reset it, or the console's."""
    reason: str
    entry: EntryReference
    may_confirm: bool
    """Whether whoever asks is the second administrator that it takes."""


def awaiting(session: Session, actor: Actor) -> tuple[ResetView, ...]:
    """Return every reset that awaits its confirmation, latest first. Raises NotAllowed."""
    require_role(actor, "administrator")
    return tuple(_awaiting(session, actor))


def find(session: Session, actor: Actor, name: str) -> ResetView:
    """Return the reset of an account that awaits its confirmation. Raises NotAllowed, NotFound."""
    found = next((reset for reset in awaiting(session, actor) if reset.account.name == name), None)
    if found is None:
        raise NotFound("no reset of this account awaits a confirmation")
    return found


def _awaiting(session: Session, actor: Actor) -> Iterator[ResetView]:
    query = select(Account).where(Account.reset_by.is_not(None), Account.closed_at.is_(None))
    waiting = {row.name: row for row in session.execute(query).scalars()}
    resets = select(HistoryEvent).where(HistoryEvent.kind == "password_reset")
    if not waiting:
        return
    for event in session.execute(resets.order_by(HistoryEvent.number.desc())).scalars():
        told: dict[str, Any] = json.loads(event.canonical)["content"]
        row = waiting.pop(told["account"], None)
        if row is not None:
            yield ResetView(
                account=accounts.find(session, actor, row.name),
                reset_by=event.actor,
                reason=told["reason"],
                entry=EntryReference(number=event.number, digest=event.digest, time=event.time),
                may_confirm=actor.account_id not in (None, row.reset_by, row.id),
            )
