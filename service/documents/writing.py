"""Frozen dataclasses to plain objects and bytes. Names and shapes are the dataclasses' own but where said.

Floats are written by Python's shortest representation, which reads back to the same bits.
"""

from __future__ import annotations

import json
from dataclasses import fields, is_dataclass
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from service.analysis.results import EquivalentTerms
from service.documents.recomputations import RecomputationAnswer
from service.documents.strict_json import Plain

if TYPE_CHECKING:
    from _typeshed import DataclassInstance

LEFT_OUT_WHEN_EMPTY: dict[type, frozenset[str]] = {
    EquivalentTerms: frozenset(field.name for field in fields(EquivalentTerms)),
    RecomputationAnswer: frozenset(("curves", "second_opinion")),
}
"""Fields that are not written where there is nothing in them; every other field always is."""


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
        return _plain_dataclass(value)
    raise TypeError(f"a {type(value).__name__} has no place in a document")


def _plain_dataclass(value: DataclassInstance) -> Plain:
    sparse = LEFT_OUT_WHEN_EMPTY.get(type(value), frozenset())
    given = {field.name: getattr(value, field.name) for field in fields(value)}
    return {name: plain(item) for name, item in given.items() if name not in sparse or item not in (None, ())}


def to_bytes(value: object, *, indent: int | None = None) -> bytes:
    """Return a dataclass or plain objects as JSON in UTF-8. Raises ValueError for NaN and infinity."""
    separators = (",", ":") if indent is None else None
    text = json.dumps(plain(value), ensure_ascii=False, allow_nan=False, indent=indent, separators=separators)
    return text.encode("utf-8")
