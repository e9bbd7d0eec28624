"""The state of the whole history in a few lines, signed with a key that is kept outside the database.

Whoever holds a checkpoint detects any later change to what it covers: the root of the Merkle tree (RFC 9162,
section 2.1) over the first `size` entries is then another one. The signature (Ed25519, RFC 8032) says that
this service made it; it covers the canonical JSON (RFC 8785) of the other fields.
"""

from __future__ import annotations

from dataclasses import fields, replace
from pathlib import Path

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import load_pem_private_key
from sqlalchemy.orm import Session

from service.documents import writing
from service.documents.canonical import canonical_bytes
from service.issuing import signing_keys
from service.issuing.base64_text import base64_text, public_text
from service.records import history
from service.records.views import Checkpoint

SigningKey = Ed25519PrivateKey


class UnusableKey(ValueError):
    """A signing key file that cannot be read as one, said in a sentence."""


def checkpoint(session: Session, key: SigningKey | None) -> Checkpoint:
    """Return the checkpoint of the history as it stands; unsigned where `key` is not its present key."""
    if key is not None and signing_keys.present(session) not in (None, public_text(key)):
        # the key was changed while this process runs with the old one, whose word is no longer taken
        key = None
    head = history.head(session)
    unsigned = Checkpoint(
        origin=history.origin(session),
        size=head.size,
        digest=head.root,
        head=head.digest,
        time=head.time,
        public_key=public_text(key) if key else None,
        signature=None,
    )
    return replace(unsigned, signature=base64_text(key.sign(_signed(unsigned)))) if key else unsigned


def _signed(checkpoint: Checkpoint) -> bytes:
    """Return what the signature covers: all but itself."""
    parts = (each.name for each in fields(checkpoint) if each.name != "signature")
    return canonical_bytes(writing.plain({name: getattr(checkpoint, name) for name in parts}))


def read_key(file: Path) -> SigningKey:
    """Read an Ed25519 private key from an unencrypted PEM file. Raises UnusableKey."""
    try:
        key = load_pem_private_key(file.read_bytes(), password=None)
    except OSError as failed:
        raise UnusableKey(f"the signing key file {file} cannot be read: {failed.strerror}") from None
    except (ValueError, TypeError, UnsupportedAlgorithm):
        raise UnusableKey(f"the signing key file {file} is no unencrypted private key in PEM") from None
    if not isinstance(key, Ed25519PrivateKey):
        raise UnusableKey(f"the signing key file {file} holds a key of another kind than Ed25519")
    return key
