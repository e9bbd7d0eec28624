"""Attacks on what the interface reads: numbers, bodies, texts, addresses, headers.

What most parsers let pass, bodies that grow when they are read, text that is markup somewhere, headers and
addresses that mean something else to the next program. Each has the statuses that it may get.
"""

from __future__ import annotations

import gzip
import json
import random
import zlib
from collections.abc import Iterator
from typing import Any

from tests.api import plant
from tests.api.plant import Body, changed
from tests.faults.attack import ANSWERED, REFUSED, Attack, World, page, sent


def attacks_on_reading(world: World, chance: random.Random) -> Iterator[Attack]:
    """Every attack once, with other numbers and texts each time."""
    yield from _numbers(chance)
    yield from _bodies(chance)
    yield from _texts(world, chance)
    yield from _addresses(world, chance)
    yield from _headers(world, chance)


NUMBERS = ("NaN", "-NaN", "Infinity", "-Infinity", "1e999", "-1e999", "0x10", "1_000", "+1", ".5", "1.", "01")
NO_NUMBERS = (*NUMBERS, "1" * 401, "true", "null", '"2.0"', "[2.0]", "{}", "1e", "--1", "\u0661")
EXTREMES = (
    "5e-324",
    "2e-308",
    "1e-300",
    "1e-20",
    "1e-9",
    "1e9",
    "1e20",
    "1e300",
    "1.7e308",
    "-0.0",
    "0",
    "0e999",
)
PLACES = (
    "/plant_model/gain",
    "/plant_model/time_constant_s",
    "/plant_model/dead_time_s",
    "/controller/proportional/value",
    "/controller/integral/value",
    "/controller/derivative",
    "/controller/measurement_filter_s",
    "/controller/scan",
)
WHOLE: dict[str, Any] = {
    "/controller/derivative": '{"value": @, "unit": "seconds"}',
    "/controller/scan": '{"interval_s": @}',
}
"""Places where the number stands inside an object."""

PLANTS: dict[str, Body] = {
    "zero leading coefficients": {"numerator": [0.0, 0.0, 1.0], "denominator": [0.0, 0.0, 0.0, 5.0, 1.0]},
    "an improper plant": {"numerator": [1.0, 2.0, 3.0], "denominator": [1.0, 1.0]},
    "an improper plant by leading zeros": {"numerator": [1.0, 0.0], "denominator": [0.0, 1.0]},
    "nothing above": {"numerator": [0.0], "denominator": [1.0, 1.0]},
    "nothing below": {"numerator": [1.0], "denominator": [0.0, 0.0]},
    "a pole on a zero": {"numerator": [1.0, 1.0], "denominator": [1.0, 3.0, 2.0]},
    "a pole on a zero on the axis": {"numerator": [1.0, 0.0], "denominator": [1.0, 1.0, 0.0]},
    "order 1000": {"numerator": [1.0], "denominator": [1.0] * 1001},
    "order 20, all equal": {"numerator": [1.0], "denominator": [1.0] * 21},
    "coefficients of every size": {"numerator": [1e-300, 1e300], "denominator": [5e-324, 1.7e308, 1.0]},
}


def _numbers(chance: random.Random) -> Iterator[Attack]:
    path = "/v1/recomputations"
    for pointer in PLACES:
        number = chance.choice(NO_NUMBERS)
        yield sent(f"{number[:9]} at {pointer}", path, _with_number(pointer, number), statuses=ANSWERED)
        number = chance.choice(EXTREMES)
        yield sent(f"{number} at {pointer}", path, _with_number(pointer, number), statuses=ANSWERED)
    for name in chance.sample(sorted(PLANTS), 4):
        model = {"kind": "transfer_function", "dead_time_s": chance.choice((0.0, 1.0, 1e9))} | PLANTS[name]
        yield sent(name, path, changed(plant.RECOMPUTATION, "/plant_model", model), statuses=ANSWERED)
    time_s = chance.choice((0.0, -1.0))
    yield sent(
        "an integral time of 0", path, changed(plant.RECOMPUTATION, "/controller/integral/value", time_s)
    )
    yield sent("a scan of 0", path, changed(plant.RECOMPUTATION, "/controller/scan", {"interval_s": 0.0}))


def _with_number(pointer: str, number: str) -> bytes:
    text = json.dumps(changed(plant.RECOMPUTATION, pointer, "@"))
    return text.replace('"@"', WHOLE.get(pointer, "@").replace("@", number)).encode()


def _bodies(chance: random.Random) -> Iterator[Attack]:
    loop, compute = "/v1/loops", "/v1/recomputations"
    text, many = json.dumps(plant.LOOP), chance.randrange(20_000, 45_000)
    zipped = gzip.compress(b" " * 20_000_000)
    doubled = text.replace('"tag"', '"site": "x", "tag"')
    yield sent("a repeated key", loop, doubled.encode())
    yield sent("a key repeated often", loop, ("{" + '"site": 1, ' * many + '"tag": 2}').encode())
    yield sent("arrays in arrays", loop, b"[" * chance.choice((17, 100_000, 900_000)))
    yield sent("objects in objects", loop, b'{"a":' * chance.choice((17, 100_000)))
    yield sent("many wrong values", compute, plant.RECOMPUTATION | {"include": ["x"] * 9000})
    yield sent("many keys", loop, {f"key {n}": n for n in range(chance.choice((101, 9000)))})
    yield sent("many values", compute, {"include": [[0] * 4999] * (many // 5000)})
    yield sent("many digits", loop, text.replace("150.0", "1" * chance.choice((401, 900_000))).encode())
    yield sent("a long text", loop, plant.LOOP | {"description": "x" * 900_000})
    yield sent("cut off", loop, text[: chance.randrange(1, len(text))].encode())
    yield sent("bytes at random", loop, bytes(chance.randrange(256) for _ in range(200)))
    yield sent("not UTF-8", loop, text.encode("utf-16"))
    yield sent("a byte order mark", loop, b"\xef\xbb\xbf" + text.encode())
    yield sent("a lone surrogate", loop, text.replace("Wash", "\\ud800").encode())
    yield sent("U+0000", loop, text.replace("Wash", "\\u0000").encode())
    yield sent("an empty body", loop, b"")
    yield sent("another kind of JSON", loop, chance.choice((b"[]", b"null", b"7", b'"x"', b"true")))
    yield sent("gzip", loop, zipped, headers={"Content-Encoding": "gzip"}, statuses=frozenset({415}))
    deflated = zlib.compress(b" " * 20_000_000)
    yield sent("deflate", loop, deflated, headers={"Content-Encoding": "deflate"}, statuses=frozenset({415}))
    yield sent("past the limit", loop, b" " * 1_000_001, statuses=frozenset({413}))
    yield sent("far past the limit", loop, b" " * 3_900_000, statuses=frozenset({413}))
    yield sent("blanks up to the limit", loop, b" " * 1_000_000)
    wrong_type = chance.choice(
        ("text/plain", "application/json; charset=latin-1", "a/b" * 500, "", ";;;", "*/*")
    )
    yield sent("another type", loop, plant.LOOP, headers={"Content-Type": wrong_type})
    form = "multipart/form-data; boundary=" + "b" * chance.randrange(1, 100)
    yield sent("a form", loop, plant.LOOP, headers={"Content-Type": form}, statuses=frozenset({415}))


TEXTS = (
    "<script>alert(1)</script>",
    "<img src='file:///etc/passwd'/>",
    '"><svg onload=alert(1)>',
    "</para><para fontSize='1'>",
    "<a href='javascript:alert(1)'>x</a>",
    "{{7*7}}${7*7}#{7*7}",
    "=cmd|' /C calc'!A0",
    "'; DROP TABLE loops; --",
    "%s%n%x",
    "a\u0301" * 90,
    "\u0645\u0631\u062d\u0628\u0627 \u65e5\u672c\u8a9e \U0001f600",
)
HIDDEN = "\u202e\u202a\u2066\u200b\u200d\u2060\ufeff\u00ad\u2028\x00\x07\x1b\r\n\t"
LONG = ("a" * 50 + "!", "TIC-" * 14, "1" * 59 + "-", "-" * 60, "A1" * 30 + "\n", " " * 60)


def _texts(world: World, chance: random.Random) -> Iterator[Attack]:
    loop, marked = "/v1/loops", chance.choice(TEXTS)
    number = chance.randrange(10**9)
    body = plant.LOOP | {"tag": f"XX-{number}", "description": marked}
    yield sent("markup that is kept", loop, body, statuses=ANSWERED)
    reason = plant.SUBMISSION | {"reason": marked, "tool": {"name": marked, "version": "1"}}
    yield sent("markup in a reason", "/v1/submissions", reason, statuses=ANSWERED)
    for path in ("/loops", "/submissions", f"/loops/{world.loop}", "/history"):
        yield page(f"{path} with markup", world, path, absent=b"<script>alert(1)")
    hidden = "TIC" + chance.choice(HIDDEN) + "204"
    refused = frozenset({400 if "\x00" in hidden else 422})
    yield sent("a hidden character in a tag", loop, plant.LOOP | {"tag": hidden}, statuses=refused)
    yield sent("a tag for slow patterns", loop, plant.LOOP | {"tag": chance.choice(LONG)}, statuses=ANSWERED)
    csv = {"Accept": "text/csv"}
    yield Attack(
        "cells that begin a formula", "/v1/history", "GET", headers=csv, statuses=ANSWERED, absent=b",=cmd"
    )


QUERIES = (
    "colour=red",
    "limit=0",
    "limit=1e9",
    "limit=-1",
    "limit=9999999999999999999999",
    "limit=1&limit=2",
    "site=%00",
    "q=%ff%fe",
    "q=" + "x" * 5000,
    "tag=%E2%80%AE",
    "since=" + "1" * 400,
    "since=2026-01-01T00:00:00Z&until=0001-01-01T00:00:00%2B23:59",
    "limit[]=1",
    "&&&===",
    ";limit=1",
)


def _addresses(world: World, chance: random.Random) -> Iterator[Attack]:
    def get(name: str, path: str, **more: Any) -> Attack:
        return Attack(name, path, "GET", statuses=more.pop("statuses", REFUSED), **more)

    for path in ("/v1/loops", "/v1/submissions", "/v1/history", "/v1/changes", "/v1/accounts"):
        query = chance.choice(QUERIES)
        yield get(f"?{query[:20]}", f"{path}?{query}", statuses=ANSWERED)
        cursor = chance.choice(("e30", "AAAA", "eyJhIjoxfQ", "%00", "x" * 999, "a.b.c", "é".encode().hex()))
        yield get("a made-up cursor", f"{path}?cursor={cursor}")
    for number in ("0", "-1", "99999999999999999999", "9007199254740992", "1e3", "%31", "%EF%BC%91"):
        yield get(f"entry {number}", f"/v1/history/{number}", statuses=ANSWERED)
    for strange in (
        "..%2f..%2fetc%2fpasswd",
        "%00",
        "%ff",
        "%c0%ae",
        "'%20OR%201=1",
        "x" * 3000,
        "%2e%2e",
        "%0d%0aX:1",
    ):
        path = chance.choice(("/v1/loops/", "/v1/submissions/", "/loops/", "/static/", "/problems/", "/"))
        yield get(f"{path}{strange[:12]}", f"{path}{strange}", absent=b"root:")
    for method in ("TRACE", "OPTIONS", "PATCH", "DELETE", "PUT", "PROPFIND", "HEAD", "CONNECT"):
        path = chance.choice(("/v1/loops", f"/v1/loops/{world.loop}", "/", "/v1/recomputations", "/livez"))
        yield Attack(f"{method} {path}", path, method, statuses=ANSWERED)
    proof = f"first={chance.randrange(-3, 10**6)}&second={chance.randrange(-3, 10**6)}"
    yield get("a proof of sizes that are not there", f"/v1/history/consistency?{proof}")


STRANGE_HEADERS: tuple[dict[str, str], ...] = (
    {"Host": "evil.example"},
    {"Host": "evil.example:80@localhost"},
    {"Host": ""},
    {"X-Forwarded-Host": "evil.example", "X-Forwarded-Proto": "https", "Forwarded": "host=evil.example"},
    {"X-Forwarded-For": "127.0.0.1, " * 500},
    {"X-HTTP-Method-Override": "DELETE"},
    {"X-Request-Id": "evil.example" * 100},
    {"If-Match": "evil.example" * 300},
    {"If-None-Match": "*"},
    {"If-None-Match": '"' * 1000},
    {"If-Modified-Since": "Thu, 99 Foo 99999 99:99:99 GMT"},
    {"Range": "bytes=0-0,1-1," * 200},
    {"Accept": "text/csv;q=nan, */*;q=1e9" * 50},
    {"Accept": "image/png"},
    {"Accept-Encoding": "gzip, br, deflate, identity;q=0, *;q=0"},
    {"Accept-Language": "x" * 3000},
    {"Cookie": "session=" + "A" * 3000},
    {"Cookie": ";;;=;=;a=b;"},
    {"Idempotency-Key": "k" * 201},
    {"Idempotency-Key": "\u00e9 k"},
    {"Authorization": "Basic " + "YTpi" * 500},
    {"Authorization": "Bearer"},
    {"Authorization": "Bearer " + "x" * 5000},
    {"Authorization": "Bearer a.b.c"},
    {"Connection": "Upgrade", "Upgrade": "websocket"},
    {"Expect": "200-maybe"},
    {"Referer": "javascript:alert(1)"},
    {"User-Agent": "() { :; }; echo"},
    {f"X-{number}": "y" * 200 for number in range(100)},
)


def _headers(world: World, chance: random.Random) -> Iterator[Attack]:
    for headers in chance.sample(STRANGE_HEADERS, 12):
        path = chance.choice(
            ("/v1/loops", f"/v1/loops/{world.loop}", "/v1/history", "/sign-in", "/livez", "/")
        )
        name = f"{next(iter(headers))} to {path}"
        # a template answers with what the header says where it trusts it
        yield Attack(name, path, "GET", headers=headers, statuses=ANSWERED, absent=b"evil.example")
    stale = chance.choice(("", "*", '"revision-99"', 'W/"x"', "\u00e9", '"a", "b"'))
    path, headers = f"/v1/loops/{world.loop}", {"If-Match": stale}
    yield sent("a change of what was not seen", path, plant.LOOP | plant.WHY, method="PUT", headers=headers)
    key = {"Idempotency-Key": chance.choice(("x" * 201, " ", "a b", "\u00e9"))}
    yield sent(
        "a key that is none", "/v1/recomputations", plant.RECOMPUTATION, headers=key, statuses=ANSWERED
    )
