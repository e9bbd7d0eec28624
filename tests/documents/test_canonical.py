"""Canonical bytes are those of RFC 8785."""

from __future__ import annotations

import hashlib
import json
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.documents.canonical import canonical_bytes, digest
from service.documents.strict_json import parse

# RFC 8785, appendix B (from memory): IEEE 754 bits and the number as ECMAScript writes it
RFC_8785_APPENDIX_B = {
    "0000000000000000": "0",
    "8000000000000000": "0",
    "0000000000000001": "5e-324",
    "8000000000000001": "-5e-324",
    "7fefffffffffffff": "1.7976931348623157e+308",
    "ffefffffffffffff": "-1.7976931348623157e+308",
    "4340000000000000": "9007199254740992",
    "c340000000000000": "-9007199254740992",
    "4430000000000000": "295147905179352830000",
    "44b52d02c7e14af5": "9.999999999999997e+22",
    "44b52d02c7e14af6": "1e+23",
    "44b52d02c7e14af7": "1.0000000000000001e+23",
    "444b1ae4d6e2ef4e": "999999999999999700000",
    "444b1ae4d6e2ef4f": "999999999999999900000",
    "444b1ae4d6e2ef50": "1e+21",
    "3eb0c6f7a0b5ed8c": "9.999999999999997e-7",
    "3eb0c6f7a0b5ed8d": "0.000001",
    "41b3de4355555553": "333333333.3333332",
    "41b3de4355555554": "333333333.33333325",
    "41b3de4355555555": "333333333.3333333",
    "41b3de4355555556": "333333333.3333334",
    "41b3de4355555557": "333333333.33333343",
    "becbf647612f3696": "-0.0000033333333333333333",
    "43143ff3c1cb0959": "1424953923781206.2",
}


@pytest.mark.parametrize(("bits", "text"), RFC_8785_APPENDIX_B.items())
def test_numbers_are_written_as_the_standard_says(bits: str, text: str) -> None:
    number = struct.unpack(">d", bytes.fromhex(bits))[0]
    assert canonical_bytes(number) == text.encode()


def test_keys_stand_in_the_order_of_utf16() -> None:
    # RFC 8785, section 3.2.3: the property names of its example and their order
    names = ["\u20ac", "\r", "\ufb33", "1", "\U0001f600", "\u0080", "\u00f6"]
    ordered = ["\r", "1", "\u0080", "\u00f6", "\u20ac", "\U0001f600", "\ufb33"]
    assert list(json.loads(canonical_bytes(dict.fromkeys(names, 0)))) == ordered


def test_the_digest_is_that_of_the_bytes() -> None:
    assert digest({"b": 1.0, "a": []}) == hashlib.sha256(b'{"a":[],"b":1}').hexdigest()


def test_what_is_no_number_has_no_canonical_form() -> None:
    with pytest.raises(ValueError):
        canonical_bytes({"a": float("nan")})


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_float64_is_read_back_from_its_canonical_form(number: float) -> None:
    assert parse(canonical_bytes(number)) == number


@given(st.dictionaries(st.text(st.characters(exclude_categories=["Cs"])), st.floats(-1e9, 1e9), max_size=5))
def test_the_order_of_keys_leaves_the_digest(entries: dict[str, float]) -> None:
    assert digest(dict(entries)) == digest(dict(reversed(entries.items())))
