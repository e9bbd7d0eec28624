"""Keys and signatures as text: raw bytes in base64 (RFC 4648, section 4)."""

from __future__ import annotations

import base64

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat


def base64_text(raw: bytes) -> str:
    """Return bytes as text."""
    return base64.b64encode(raw).decode()


def public_text(key: Ed25519PrivateKey) -> str:
    """Return the raw public key of a private one as text."""
    return base64_text(key.public_key().public_bytes(Encoding.Raw, PublicFormat.Raw))
