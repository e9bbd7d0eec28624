"""Passwords: hashed with Argon2id, verified in about the same time for names that exist and names that do
not.
"""

from __future__ import annotations

import unicodedata
from functools import cache

from argon2 import PasswordHasher
from argon2.exceptions import InvalidHashError, VerificationError
from argon2.profiles import RFC_9106_LOW_MEMORY
from sqlalchemy.orm import Session

from service.documents import limits
from service.documents.errors import FieldProblem

CHARACTERS_MIN = 15
CHARACTERS_MAX = limits.PASSWORD_CHARACTERS_MAX
"""OWASP ASVS 5.0, 6.2.1 and 6.2.9: length alone, no rules on composition."""


def default_hasher() -> PasswordHasher:
    """Return the hasher with RFC 9106's second recommended choice (64 MiB, three passes, four lanes)."""
    # named, not the library's default: with another cost than that of older accounts, the time of a sign-in
    # would tell that there is such an account
    return PasswordHasher.from_parameters(RFC_9106_LOW_MEMORY)


def hasher_of(session: Session) -> PasswordHasher:
    """Return the hasher that the database was opened with."""
    hasher: PasswordHasher = session.info["password_hasher"]
    return hasher


def problem(password: str, pointer: str) -> FieldProblem | None:
    """Say what is wrong with a new password, or None."""
    length = len(_composed(password))
    if length < CHARACTERS_MIN:
        return FieldProblem(pointer, f"a password has at least {CHARACTERS_MIN} characters")
    if length > CHARACTERS_MAX:
        return FieldProblem(pointer, f"a password has at most {CHARACTERS_MAX} characters")
    return None


def hashed(hasher: PasswordHasher, password: str) -> str:
    """Return the salted hash to be kept."""
    return hasher.hash(_composed(password))


def verified(hasher: PasswordHasher, kept: str | None, password: str) -> bool:
    """Say whether `password` is the one behind `kept`.

    None (no such account) takes as long and is never true.
    """
    # longer than any password that can have been set: not worth hashing
    if len(password) > 4 * CHARACTERS_MAX:
        return False
    # made by whoever signs in first, known or not: it takes as long as one more verification
    nobodys = _nobodys(hasher)
    try:
        return hasher.verify(kept or nobodys, _composed(password)) and kept is not None
    except (VerificationError, InvalidHashError):
        return False


def _composed(password: str) -> str:
    # one person's two keyboards may send an accented letter in two ways
    return unicodedata.normalize("NFC", password)


@cache
def _nobodys(hasher: PasswordHasher) -> str:
    return hasher.hash("the password of no account")
