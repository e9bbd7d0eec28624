"""JSON text to plain objects, with nothing let through that programs would read differently.

Python's reader takes NaN, turns 1e999 into infinity and lets the last of repeated keys win. Such places are
marked while the text is read and named, with their pointers, in one refusal afterwards.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator
from dataclasses import dataclass

from service.documents import limits
from service.documents.errors import FieldProblem, NotJson, TooLarge, pointer

Plain = None | bool | int | float | str | list["Plain"] | dict[str, "Plain"]
"""What JSON holds, as Python's own types."""

_EXACT_INTEGER_MAX = 2**53
_TOO_DEEP = f"objects and arrays stand inside one another at most {limits.DEPTH_MAX} deep"


@dataclass(frozen=True, slots=True)
class _Refused:
    """Stands in the read document where something must not stand."""

    detail: str


def parse(raw: bytes) -> Plain:
    """Read JSON text in UTF-8 strictly; -0.0 becomes 0.0, every other float64 keeps its bits.

    Integers past ±2^53 become float64, since that is what JSON promises of them (RFC 8259, section 6). Raises
    TooLarge for too many bytes, else NotJson, naming the places where there are any.
    """
    if len(raw) > limits.BODY_BYTES_MAX:
        raise TooLarge(f"a document has at most {limits.BODY_BYTES_MAX} bytes")
    document = _load(_text(raw))
    places = tuple(_places(document))
    if places:
        raise NotJson(_summary(places), places)
    plain: Plain = document
    return plain


def _text(raw: bytes) -> str:
    if raw.startswith(b"\xef\xbb\xbf"):
        raise NotJson("the document starts with a byte order mark")
    try:
        return raw.decode("utf-8")
    except UnicodeDecodeError as error:
        raise NotJson(f"the document is not UTF-8 (byte {error.start})") from None


def _load(text: str):  # type: ignore[no-untyped-def]
    try:
        return json.loads(
            text,
            object_pairs_hook=_object,
            parse_float=_float,
            parse_int=_integer,
            parse_constant=lambda name: _Refused(f"{name} is not a number in JSON"),
        )
    except json.JSONDecodeError as error:
        raise NotJson(f"not JSON at line {error.lineno}, column {error.colno}: {error.msg}") from None
    except RecursionError:
        raise NotJson(_TOO_DEEP) from None


def _float(text: str) -> float | _Refused:
    if len(text) > limits.NUMBER_CHARACTERS_MAX:
        return _Refused(f"a number has at most {limits.NUMBER_CHARACTERS_MAX} characters")
    number = float(text)
    if math.isinf(number):
        return _Refused("a number lies past the range of float64")
    return number + 0.0  # -0.0 + 0.0 is 0.0


def _integer(text: str) -> int | float | _Refused:
    if len(text) > limits.NUMBER_CHARACTERS_MAX:
        return _Refused(f"a number has at most {limits.NUMBER_CHARACTERS_MAX} characters")
    number = int(text)
    return number if abs(number) <= _EXACT_INTEGER_MAX else _float(text)


def _object(pairs: list[tuple[str, object]]) -> object:
    found = dict(pairs)
    if len(found) == len(pairs):
        return found
    seen: set[str] = set()
    for key, _ in pairs:
        if key in seen:
            found[key] = _Refused("this key stands more than once")
        seen.add(key)
    return found


def _places(document: object) -> Iterator[FieldProblem]:
    """Walk without recursion, each value once; stop at the first limit on sizes that is passed."""
    waiting: list[tuple[tuple[str | int, ...], object]] = [((), document)]
    values = 0
    while waiting:
        path, value = waiting.pop()
        values += 1
        detail = _oversize(path, value, values) or _unfit(value)
        if detail is not None:
            yield FieldProblem(pointer(path), detail)
        if values > limits.VALUES_MAX:
            return
        if detail is None:
            waiting.extend(reversed([((*path, key), child) for key, child in _children(value)]))


def _children(value: object) -> list[tuple[str | int, object]]:
    if isinstance(value, dict):
        return list(value.items())
    return list(enumerate(value)) if isinstance(value, list) else []


def _oversize(path: tuple[str | int, ...], value: object, values: int) -> str | None:
    if values > limits.VALUES_MAX:
        return f"a document has at most {limits.VALUES_MAX} values"
    if not isinstance(value, (dict, list)):
        return None
    if len(path) >= limits.DEPTH_MAX:
        return _TOO_DEEP
    if isinstance(value, dict) and len(value) > limits.KEYS_MAX:
        return f"an object has at most {limits.KEYS_MAX} keys"
    if isinstance(value, list) and len(value) > limits.ITEMS_MAX:
        return f"an array has at most {limits.ITEMS_MAX} items"
    return None


def _unfit(value: object) -> str | None:
    if isinstance(value, _Refused):
        return value.detail
    texts = [value] if isinstance(value, str) else list(value) if isinstance(value, dict) else []
    return next((detail for text in texts if (detail := _unfit_text(text))), None)


def _unfit_text(text: str) -> str | None:
    if "\0" in text:
        return "a text has no U+0000"
    if any("\ud800" <= character <= "\udfff" for character in text):
        return "a text has no half of a surrogate pair"
    return None


def _summary(places: tuple[FieldProblem, ...]) -> str:
    first = places[0]
    more = f", and {len(places) - 1} more" if len(places) > 1 else ""
    return f"{first.pointer or 'the whole document'}: {first.detail}{more}"
