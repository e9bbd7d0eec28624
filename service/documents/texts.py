"""Texts that people read: what may stand in a tag, a line, a reason.

Invisible and direction-changing characters are refused: with them, a reviewer reads something else than what
is stored.
"""

from __future__ import annotations

import re
import unicodedata
from datetime import UTC, datetime
from typing import Annotated

from pydantic import AfterValidator, AwareDatetime, StringConstraints

from service.documents import limits

_BREAKS = "\n\t"


def _unreadable(text: str, allowed: str) -> str | None:
    for character in text:
        if (
            unicodedata.category(character) in ("Cc", "Cf", "Co", "Cn", "Cs", "Zl", "Zp")
            and character not in allowed
        ):
            return f"U+{ord(character):04X}"
    return None


def _line(text: str) -> str:
    if found := _unreadable(text, ""):
        raise ValueError(f"a line has no invisible or control characters ({found})")
    if text != text.strip():
        raise ValueError("no space stands at the beginning or the end")
    return text


def _prose(text: str) -> str:
    if found := _unreadable(text, _BREAKS):
        raise ValueError(f"a text has no invisible or control characters but line breaks and tabs ({found})")
    if not text.strip():
        raise ValueError("there is something to read")
    return text


def _tag(text: str) -> str:
    _line(text)
    if unicodedata.normalize("NFC", text) != text:
        raise ValueError("a tag is written with composed characters (Unicode NFC)")
    if re.search(r"\s\s", text):
        raise ValueError("no two spaces stand together")
    return text


def _utc(moment: datetime) -> datetime:
    try:
        return moment.astimezone(UTC)
    except OverflowError:
        raise ValueError("this lies before the year 1 or past the year 9999 in UTC") from None


Line = Annotated[
    str, StringConstraints(min_length=1, max_length=limits.LINE_CHARACTERS_MAX), AfterValidator(_line)
]
"""A name or short description on one line."""

Tag = Annotated[
    str, StringConstraints(min_length=1, max_length=limits.TAG_CHARACTERS_MAX), AfterValidator(_tag)
]
"""The tag of a loop or the name of a site, as it is typed."""

Prose = Annotated[
    str, StringConstraints(min_length=1, max_length=limits.REASON_CHARACTERS_MAX), AfterValidator(_prose)
]
"""A reason, evidence or effect, on as many lines as it takes."""

Moment = Annotated[AwareDatetime, AfterValidator(_utc)]
"""A time in RFC 3339 with its offset, kept in UTC."""
