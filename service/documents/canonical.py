"""The one sequence of bytes that stands for a document, and its digest.

RFC 8785 (JSON Canonicalization Scheme): keys in the order of their UTF-16 code units, numbers as ECMAScript
writes them. Python's `json.dumps` writes other bytes for 1e16, 1e-7, -0.0 and 1.0.
"""

from __future__ import annotations

import hashlib

import rfc8785

from service.documents.strict_json import Plain


def canonical_bytes(plain: Plain) -> bytes:
    """Return the canonical JSON of plain objects. Raises ValueError for what has none (NaN, infinity)."""
    return rfc8785.dumps(plain)


def digest(plain: Plain) -> str:
    """Return the SHA-256 of the canonical bytes as 64 lower-case hex digits."""
    return hashlib.sha256(canonical_bytes(plain)).hexdigest()
