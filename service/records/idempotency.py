"""First answers kept under the key that a client chose, in the transaction of the change itself."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from service.records.errors import IdempotencyKeyReused, NotAllowed
from service.records.roles import Actor
from service.records.tables.accounts import IdempotencyKey


@dataclass(frozen=True, kw_only=True, slots=True)
class KeptAnswer:
    """What was answered first. `fingerprint` stands for the request, its password left out."""

    fingerprint: str
    status: int
    location: str | None
    etag: str | None
    body: bytes


def find(session: Session, actor: Actor, key: str) -> KeptAnswer | None:
    """Return the answer kept for this account under this key."""
    row = session.get(IdempotencyKey, (actor.account_id, key)) if actor.account_id else None
    if row is None:
        return None
    return KeptAnswer(
        fingerprint=row.fingerprint, status=row.status, location=row.location, etag=row.etag, body=row.body
    )


def keep(session: Session, actor: Actor, key: str, answer: KeptAnswer, now: datetime) -> None:
    """Keep an answer.

    Raises IdempotencyKeyReused where the key is taken: the same request was sent twice at once, and the other
    one has been answered meanwhile.
    """
    if actor.account_id is None:
        raise NotAllowed("only an account has keys")
    if find(session, actor, key) is not None:
        raise IdempotencyKeyReused("this key came with another request before")
    session.add(
        IdempotencyKey(
            account_id=actor.account_id,
            key=key,
            fingerprint=answer.fingerprint,
            status=answer.status,
            location=answer.location,
            etag=answer.etag,
            body=answer.body,
            created_at=now,
        )
    )
    session.flush()
