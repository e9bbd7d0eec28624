"""The keys that sign checkpoints, as the history tells of them: each taken up and changed by an entry.

What a key signs when it is taken up names the place in the history, so that the entry cannot be moved: the
store's origin, the size and the root before the entry, the key before and the new one. A change is signed by
both keys, so that whoever holds an old public key can follow to the new one without asking anybody.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import Encoding, NoEncryption, PrivateFormat
from sqlalchemy.orm import Session

from service.documents import writing
from service.documents.canonical import canonical_bytes
from service.issuing.base64_text import base64_text, public_text
from service.records import history
from service.records.database import Database
from service.records.errors import Conflict, StoreNotUsable
from service.records.event_kinds import EventKind
from service.records.roles import CONSOLE, Actor, require_role

TAKEN_UP: EventKind = "signing_key_taken_up"
CHANGED: EventKind = "signing_key_changed"
PURPOSE = "signing key"


@dataclass(frozen=True, kw_only=True, slots=True)
class _Statement:
    """What is signed."""

    purpose: str
    origin: str
    size: int
    digest: str
    previous_key: str | None
    public_key: str


def make() -> bytes:
    """Return a new private key as unencrypted PEM."""
    form = (Encoding.PEM, PrivateFormat.PKCS8, NoEncryption())
    return Ed25519PrivateKey.generate().private_bytes(*form)


def present(session: Session) -> str | None:
    """Return the public key, in base64, that signs checkpoints from now on; None before there was one."""
    content = history.last_content(session, TAKEN_UP, CHANGED)
    return None if content is None else str(content["public_key"])


def take_up(database: Database, key: Ed25519PrivateKey) -> None:
    """Let the history tell of the store's first signing key.

    Nothing where it is the present one already. Raises StoreNotUsable where another one is.
    """
    with database.reading() as session:
        found = present(session)
    if found is None:
        with database.writing() as session:
            found = present(session)
            if found is None:
                content = _content(session, key, previous=None, previous_key=None)
                history.append(session, kind=TAKEN_UP, actor=CONSOLE, content=content, now=database.now())
                return
    if found != public_text(key):
        raise StoreNotUsable(
            f"checkpoints of this store are signed with the key {found}; gain-signoff key change puts another"
            " one in its place"
        )


def change(
    session: Session,
    actor: Actor,
    *,
    previous: Ed25519PrivateKey | None,
    new: Ed25519PrivateKey,
    reason: str,
    now: datetime,
) -> None:
    """Put another key in the present one's place.

    `previous` is the present key, or None where it is lost: then nothing confirms the new one, and every
    verification says so. Raises NotAllowed, Conflict.
    """
    require_role(actor, "administrator")
    found = present(session)
    if found is None:
        raise Conflict("this store has no signing key yet; the service takes up the one in its settings")
    if previous is not None and public_text(previous) != found:
        raise Conflict(f"the old key is not the present one, which is {found}")
    if public_text(new) == found:
        raise Conflict("this key signs already")
    content = _content(session, new, previous=previous, previous_key=found)
    history.append(session, kind=CHANGED, actor=actor, content=content | {"reason": reason}, now=now)


def _content(
    session: Session, new: Ed25519PrivateKey, *, previous: Ed25519PrivateKey | None, previous_key: str | None
) -> dict[str, object]:
    head = history.head(session)
    statement = _Statement(
        purpose=PURPOSE,
        origin=history.origin(session),
        size=head.size,
        digest=head.root,
        previous_key=previous_key,
        public_key=public_text(new),
    )
    signed = canonical_bytes(writing.plain(statement))
    return {
        "public_key": statement.public_key,
        "previous_key": previous_key,
        "signature": base64_text(new.sign(signed)),
        "previous_signature": base64_text(previous.sign(signed)) if previous else None,
    }
