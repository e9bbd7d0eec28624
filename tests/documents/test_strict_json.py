"""JSON text is read strictly: what programs would read differently is refused, with its place."""

from __future__ import annotations

import math
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.documents import limits
from service.documents.errors import NotJson, TooLarge
from service.documents.strict_json import parse


def places(raw: bytes) -> list[str]:
    with pytest.raises(NotJson) as caught:
        parse(raw)
    return [problem.pointer for problem in caught.value.errors]


def bits(number: object) -> bytes:
    assert isinstance(number, (int, float))
    return struct.pack(">d", number)


def test_plain_objects_come_back_as_they_were_written() -> None:
    assert parse(b'{"a": [1, 2.5, "x", null, true], "b": {}}') == {"a": [1, 2.5, "x", None, True], "b": {}}


@pytest.mark.parametrize("word", [b"NaN", b"Infinity", b"-Infinity"])
def test_a_word_for_no_number_is_refused_where_it_stands(word: bytes) -> None:
    assert places(b'{"a": [1, ' + word + b"]}") == ["/a/1"]


@pytest.mark.parametrize("number", [b"1e999", b"-1e999", b"1.8e308", b"9" * 310])
def test_a_number_past_float64_is_refused_where_it_stands(number: bytes) -> None:
    assert places(b'{"a": {"b": ' + number + b"}}") == ["/a/b"]


def test_the_largest_float64_is_read() -> None:
    assert parse(b"1.7976931348623157e308") == 1.7976931348623157e308


@pytest.mark.parametrize("zero", [b"-0.0", b"-0", b"-0e5", b"-1e-400"])
def test_minus_zero_is_read_as_zero(zero: bytes) -> None:
    number = parse(zero)
    assert bits(number) == bits(0.0)


def test_a_subnormal_number_keeps_its_bits() -> None:
    assert bits(parse(b"5e-324")) == bits(5e-324)


def test_an_integer_past_the_exact_ones_is_the_nearest_float64() -> None:
    assert parse(b"9007199254740993") == 9007199254740992.0


def test_repeated_keys_are_refused_where_they_stand() -> None:
    assert places(b'{"a": {"b": 1, "c": 2, "b": 3}}') == ["/a/b"]


def test_a_repeated_key_is_found_though_one_writes_it_escaped() -> None:
    assert places(b'{"a": 1, "\\u0061": 2}') == ["/a"]


def test_all_places_are_named_in_one_refusal() -> None:
    assert places(b'{"a": NaN, "b": 1e999, "c": 1, "c": 2}') == ["/a", "/b", "/c"]


def test_a_pointer_escapes_slash_and_tilde() -> None:
    assert places(b'{"a/b~c": NaN}') == ["/a~1b~0c"]


@pytest.mark.parametrize("depth", [limits.DEPTH_MAX + 1, 900])
def test_too_deep_a_document_is_refused_at_the_first_level_too_many(depth: int) -> None:
    assert places(b"[" * depth + b"]" * depth) == ["/0" * limits.DEPTH_MAX]


def test_depth_past_the_readers_own_stack_is_refused() -> None:
    assert places(b"[" * 100_000 + b"]" * 100_000) == []


def test_the_deepest_allowed_document_is_read() -> None:
    assert parse(b"[" * limits.DEPTH_MAX + b"]" * limits.DEPTH_MAX)


def test_an_object_with_too_many_keys_is_refused() -> None:
    keys = b",".join(b'"k%d": 1' % number for number in range(limits.KEYS_MAX + 1))
    assert places(b'{"a": {' + keys + b"}}") == ["/a"]


def test_an_array_with_too_many_items_is_refused() -> None:
    items = b",".join([b"1"] * (limits.ITEMS_MAX + 1))
    assert places(b'{"a": [' + items + b"]}") == ["/a"]


def test_too_many_values_in_all_are_refused() -> None:
    row = b"[" + b",".join([b"1"] * 9000) + b"]"
    assert len(places(b"[" + b",".join([row] * 6) + b"]")) == 1


def test_a_number_of_too_many_characters_is_refused() -> None:
    assert places(b'{"a": 0.' + b"1" * limits.NUMBER_CHARACTERS_MAX + b"}") == ["/a"]


def test_a_body_of_too_many_bytes_is_refused_before_it_is_read() -> None:
    with pytest.raises(TooLarge):
        parse(b"[" * (limits.BODY_BYTES_MAX + 1))


@pytest.mark.parametrize(
    "raw", [b"", b"   ", b"{", b'{"a": }', b"{'a': 1}", b'{"a": 1,}', b"1 2", b"tru", b"+1", b"01", b".5"]
)
def test_what_is_not_json_is_refused(raw: bytes) -> None:
    with pytest.raises(NotJson, match="not JSON at line 1"):
        parse(raw)


@pytest.mark.parametrize("raw", [b"\xff", b'"\xc3"', b'"\xed\xa0\x80"', b"\xfe\xff\x00{\x00}"])
def test_what_is_not_utf8_is_refused(raw: bytes) -> None:
    with pytest.raises(NotJson, match="not UTF-8"):
        parse(raw)


def test_a_byte_order_mark_is_refused() -> None:
    with pytest.raises(NotJson, match="byte order mark"):
        parse(b"\xef\xbb\xbf{}")


@pytest.mark.parametrize("text", [b'"\\ud800"', b'"\\udc00x"', b'"a\\u0000"'])
def test_a_text_that_cannot_be_kept_is_refused_where_it_stands(text: bytes) -> None:
    assert places(b'{"a": [' + text + b"]}") == ["/a/0"]


def test_a_surrogate_pair_is_one_character() -> None:
    assert parse(b'"\\ud83d\\ude00"') == "\U0001f600"


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_any_float64_but_minus_zero_keeps_its_bits(number: float) -> None:
    expected = 0.0 if number == 0 else number
    assert bits(parse(repr(number).encode())) == bits(expected)


@given(st.binary(max_size=200))
def test_no_bytes_whatever_raise_anything_but_a_refusal(raw: bytes) -> None:
    try:
        plain = parse(raw)
    except NotJson:
        return
    assert not isinstance(plain, float) or math.isfinite(plain)
