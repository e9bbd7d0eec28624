"""Signatures of checkpoints and of the keys that make them: Ed25519 (RFC 8032), all of it in base64.

What is signed is canonical JSON (RFC 8785) of texts, whole numbers and null under names in ASCII; for these
Python's own encoder writes the standard's form.
"""

from __future__ import annotations

import base64
import json
from collections.abc import Mapping

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey


def holds(public_key: object, signature: object, document: Mapping[str, object]) -> bool:
    """Say whether the signature is the key's own, of exactly this document."""
    try:
        key = Ed25519PublicKey.from_public_bytes(_raw(public_key))
        key.verify(_raw(signature), _canonical(document))
    except (ValueError, InvalidSignature):
        return False
    return True


def _canonical(document: Mapping[str, object]) -> bytes:
    if not all(value is None or type(value) in (str, int) for value in document.values()):
        raise ValueError("only texts, whole numbers and null are signed")
    text = json.dumps(document, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    return text.encode()


def _raw(text: object) -> bytes:
    if not isinstance(text, str):
        raise ValueError("no text in base64")
    return base64.b64decode(text, validate=True)
