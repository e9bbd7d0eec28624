"""One answer for one request, however often it is sent: the Idempotency-Key header on every POST.

The key belongs to the account that sent it. Only answers to what was done are kept, in the transaction that
did it; a refusal did nothing, so that the same key may be tried again.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import datetime

from flask import Request
from sqlalchemy.orm import Session

from service.api.answers import Answer
from service.api.refusals import BadHeader
from service.documents import canonical
from service.documents.strict_json import Plain
from service.records import accounts, idempotency
from service.records.errors import IdempotencyKeyReused
from service.records.idempotency import KeptAnswer
from service.records.roles import Actor

KEY_CHARACTERS_MAX = 200

_KEY = re.compile(rf"[!-~]{{1,{KEY_CHARACTERS_MAX}}}")


@dataclass(frozen=True, kw_only=True, slots=True)
class Key:
    """A key with what identifies its request.

    No password is part of the fingerprint; the one that signs is checked again.
    """

    text: str
    fingerprint: str
    password: str | None = field(repr=False)


def key_of(request: Request, plain: Plain) -> Key | None:
    """Return the key that came with a POST, None where there is none. Raises BadHeader."""
    text = request.headers.get("Idempotency-Key")
    if text is None or request.method != "POST":
        return None
    if not _KEY.fullmatch(text):
        raise BadHeader(f"an Idempotency-Key has 1 to {KEY_CHARACTERS_MAX} visible ASCII characters")
    rest, password = _without_password(plain)
    fingerprint = canonical.digest({"method": request.method, "path": request.path, "body": rest})
    return Key(text=text, fingerprint=fingerprint, password=password)


def first_answer(session: Session, actor: Actor, key: Key | None, now: datetime) -> Answer | None:
    """Return what was answered first under this key.

    Raises IdempotencyKeyReused where that was to another request, and what a wrong password raises.
    """
    kept = idempotency.find(session, actor, key.text) if key else None
    if key is None or kept is None:
        return None
    if kept.fingerprint != key.fingerprint:
        raise IdempotencyKeyReused("this key came before, with another body or to another address")
    if key.password is not None:
        accounts.check_password(session, actor, key.password, now)
    return Answer(body=kept.body, status=kept.status, location=kept.location, etag=kept.etag)


def once(
    session: Session, actor: Actor, key: Key | None, now: datetime, make: Callable[[], Answer]
) -> Answer:
    """Return the first answer, or make it and keep it."""
    first = first_answer(session, actor, key, now)
    if first is not None:
        return first
    answer = make()
    if key is not None:
        idempotency.keep(session, actor, key.text, _kept(answer, key), now)
    return answer


def _kept(answer: Answer, key: Key) -> KeptAnswer:
    return KeptAnswer(
        fingerprint=key.fingerprint,
        status=answer.status,
        location=answer.location,
        etag=answer.etag,
        body=answer.body if answer.kept_body is None else answer.kept_body,
    )


def _without_password(plain: Plain) -> tuple[Plain, str | None]:
    if not isinstance(plain, dict):
        return plain, None
    password = plain.get("password")
    # a fingerprint is a quick hash, from which a password could be guessed: none goes into it
    rest = {name: value for name, value in plain.items() if not name.endswith("password")}
    return rest, password if isinstance(password, str) else None
