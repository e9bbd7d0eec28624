"""Frozen dataclasses to plain objects and bytes. Names and shapes are the dataclasses' own but where said.

Floats are written by Python's shortest representation, which reads back to the same bits.
"""

from __future__ import annotations

import json
from dataclasses import fields, is_dataclass
from datetime import UTC, datetime
from functools import cache

from service.documents.strict_json import Plain


def plain(value: object) -> Plain:
    """Return a dataclass, with all that is in it, as what JSON holds; times become RFC 3339 in UTC."""
    if value is None or isinstance(value, (str, bool, int)):
        return value
    if isinstance(value, float):
        return value + 0.0
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if isinstance(value, dict):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, datetime):
        return value.astimezone(UTC).isoformat().replace("+00:00", "Z")
    if is_dataclass(value) and not isinstance(value, type):
        return {name: plain(getattr(value, name)) for name in _names(type(value))}
    raise TypeError(f"a {type(value).__name__} has no place in a document")


def to_bytes(value: object, *, indent: int | None = None) -> bytes:
    """Return a dataclass or plain objects as JSON in UTF-8. Raises ValueError for NaN and infinity."""
    separators = (",", ":") if indent is None else None
    text = json.dumps(plain(value), ensure_ascii=False, allow_nan=False, indent=indent, separators=separators)
    return text.encode("utf-8")


@cache
def _names(dataclass_type: type) -> tuple[str, ...]:
    return tuple(field.name for field in fields(dataclass_type))
