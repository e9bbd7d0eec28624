"""First answers kept under the key that a client chose, in the transaction of the change itself."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from service.records.roles import Actor


@dataclass(frozen=True, kw_only=True, slots=True)
class KeptAnswer:
    """What was answered first. `fingerprint` stands for the request, its password left out."""

    fingerprint: str
    status: int
    location: str | None
    etag: str | None
    body: bytes


def find(session: Session, actor: Actor, key: str) -> KeptAnswer | None:
    """The answer kept for this account under this key."""
    raise NotImplementedError


def keep(session: Session, actor: Actor, key: str, answer: KeptAnswer, now: datetime) -> None:
    """Keep an answer. Raises IdempotencyKeyReused where the key is taken."""
    raise NotImplementedError
