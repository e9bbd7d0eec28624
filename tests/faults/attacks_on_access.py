"""Attacks on who may do what: rights of others, signatures, sign-in, forms; and on HTTP itself."""

from __future__ import annotations

import base64
import random
from collections.abc import Iterator
from urllib.parse import quote, urlencode

from service.pages.forgery import TOKEN_FIELD
from tests.api import plant
from tests.api.plant import Body
from tests.faults.attack import ANSWERED, FORM, JSON, Attack, World, page, sent

HIDDEN_FROM = "elsewhere"
"""Who has another area."""


def attacks_on_access(world: World, chance: random.Random) -> Iterator[Attack]:
    """Every attack once, with other numbers and texts each time."""
    yield from _rights(world, chance)
    yield from _signatures(world, chance)
    yield from _sign_in(chance)
    yield from _pages(world, chance)
    yield from _broken_http(chance)


def _rights(world: World, chance: random.Random) -> Iterator[Attack]:
    loop, submission = f"/v1/loops/{world.loop}", f"/v1/submissions/{world.submission}"
    closed = (loop, f"{loop}/models", f"{loop}/revisions", f"{loop}/gains-in-force", submission)
    closed += (
        f"{submission}/content",
        f"{submission}/curves",
        f"{submission}/comparison",
        f"{submission}/sheet.pdf",
    )
    for path in closed:
        yield Attack("a record of another area", path, "GET", person=HIDDEN_FROM, statuses=frozenset({404}))
    path = chance.choice(closed)
    yield Attack("no credential", path, "GET", person=None, statuses=frozenset({401}))
    token = base64.urlsafe_b64encode(chance.randbytes(48)).decode()
    headers = {"Authorization": f"Bearer {token}"}
    yield Attack("a made-up token", path, "GET", headers=headers, person=None, statuses=frozenset({401}))
    for field in ("state", "id", "approved_by", "content_digest", "revision", "prepared_at"):
        body = plant.SUBMISSION | {field: "approved"}
        yield sent(f"{field} in a body", "/v1/submissions", body, statuses=frozenset({422}))
    for person in ("auditor", "reviewer", "administrator"):
        forbidden = frozenset({403})
        yield sent(
            "gains of who may not", "/v1/submissions", plant.SUBMISSION, person=person, statuses=forbidden
        )


def _signatures(world: World, chance: random.Random) -> Iterator[Attack]:
    path = f"/v1/submissions/{world.submission}/decisions"
    decision: Body = {
        "decision": "approve",
        "reason": "Read.",
        "content_digest": world.digest,
        "password": world.passwords["both"],
        "deviation": [],
    }
    own = frozenset({403, 429})
    yield sent("one's own gains approved", path, decision, statuses=own)
    signed = decision | {"password": chance.randbytes(12).hex()}
    yield sent("a signature with a wrong password", path, signed, person="reviewer", statuses=own)
    other = decision | {
        "content_digest": chance.randbytes(32).hex(),
        "password": world.passwords["second_reviewer"],
    }
    seen = frozenset({412, 422, 429})
    yield sent("a decision on other content", path, other, person="second_reviewer", statuses=seen)
    long = decision | {"password": "x" * 100_000}
    yield sent("a password without end", path, long, person="second_reviewer", statuses=seen)


def _sign_in(chance: random.Random) -> Iterator[Attack]:
    typed = f"name={quote(chance.randbytes(5))}&password={'x' * 20}&token={'0' * 64}".encode()
    refused = frozenset({401, 403, 429})
    yield Attack(
        "a sign-in without its token", "/sign-in", body=typed, headers=FORM, person=None, statuses=refused
    )
    forged = {"Cookie": f"gain_signoff_session={chance.randbytes(33).hex()}"}
    yield Attack("a made-up session", "/loops", "GET", headers=forged, person=None, statuses=frozenset({401}))
    for target in ("//evil.example", "/\\evil.example", "https://evil.example/", "javascript:alert(1)"):
        path = f"/sign-in?next={quote(target, safe='')}"
        shown = frozenset({200})
        # the text may stand in the hidden field; what may not is an address to go to
        yield Attack(
            "another site behind the sign-in",
            path,
            "GET",
            person=None,
            statuses=shown,
            absent=b'href="//evil',
        )


NONSENSE = (
    "",
    " ",
    "NaN",
    "1e999",
    "-1",
    "1,5",
    "approve",
    "x" * 5000,
    "\u202eTIC",
    "\u200b",
    "\x00",
    "a\r\nb",
    "<script>alert(1)</script>",
    "\u0661\u0662",
    "0" * 64,
    "a password that is wrong",
)


def _pages(world: World, chance: random.Random) -> Iterator[Attack]:
    forms = ("sign", "confirm", "installation")
    path = f"/submissions/{world.submission}/{chance.choice(forms)}"
    refused = frozenset(range(400, 500))
    yield page("a form without its token", world, path, "POST", body=b"decision=approve", statuses=refused)
    elsewhere = FORM | {"Origin": "https://evil.example"}
    yield page(
        "a form of another site", world, path, "POST", body=b"x=y", headers=elsewhere, statuses=refused
    )
    many = "&".join(f"f{n}=" for n in range(chance.choice((900, 100_000)))).encode()
    yield page("a form of very many fields", world, path, "POST", body=many, headers=FORM, statuses=refused)
    long = b"reason=" + b"x" * chance.choice((600_000, 3_900_000))
    yield page("a form without end", world, path, "POST", body=long, headers=FORM, statuses=refused)
    boundary = "multipart/form-data; boundary=b"
    part = b'--b\r\nContent-Disposition: form-data; name="n"\r\n\r\nv\r\n'
    parts = part * chance.choice((10, 2000, 50_000)) + b"--b--\r\n"
    headers = {"Content-Type": boundary}
    yield page(
        "a form of very many parts", world, path, "POST", body=parts, headers=headers, statuses=refused
    )
    for path, fields in world.forms.items():
        typed = [
            (name, held if name == TOKEN_FIELD or chance.random() < 0.3 else chance.choice(NONSENSE))
            for name, held in fields
        ]
        body = urlencode(typed).encode()
        yield page("a form filled in with nonsense", world, path, "POST", body=body, headers=FORM)
    for name in ("loops", "submissions", "history"):
        query = chance.choice(
            ("q=%00", "cursor=AAAA", "state=none", "limit=0", "x=" + "y" * 3000, "area=%E2%80%AE")
        )
        yield page("a list with a strange query", world, f"/{name}?{query}")
    for path in (
        f"/loops/{world.loop}",
        f"/submissions/{world.submission}",
        f"/submissions/{world.submission}/sheet.pdf",
    ):
        yield page("a page of a record", world, path, statuses=frozenset({200}))


RAW: tuple[bytes, ...] = (
    b"GET\r\n\r\n",
    b"\r\n\r\n\r\nGET / HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n",
    b"GET / HTTP/9.9\r\nHost: x\r\nConnection: close\r\n\r\n",
    b"G\x00T / HTTP/1.1\r\nHost: x\r\n\r\n",
    b"GET http://evil.example/ HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n",
    b"GET // HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n",
    b"GET / HTTP/1.1\r\nHost: x\r\nHost: y\r\nConnection: close\r\n\r\n",
    b"GET / HTTP/1.1\r\nHost: x\r\n folded: header\r\nConnection: close\r\n\r\n",
    b"GET / HTTP/1.1\r\nHost : x\r\nConnection: close\r\n\r\n",
    b"GET / HTTP/1.1\r\n" + b"X: " + b"y" * 300_000 + b"\r\n\r\n",
    b"GET /" + b"x" * 300_000 + b" HTTP/1.1\r\nHost: x\r\n\r\n",
    b"GET /livez HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: identity\r\nConnection: close\r\n\r\n",
    b"GET /v1/loops HTTP/1.1\r\nHost: x\r\nCookie: a=\x7f;\x01\r\nConnection: close\r\n\r\n",
    b"GET /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: 5\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: -1\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: 1_0\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: 99999999999999999999\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: 4\r\nContent-Length: 5\r\n\r\nabcde",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nContent-Length: 4\r\nTransfer-Encoding: chunked\r\n\r\n0\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: chunked\r\n\r\nzz\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: chunked\r\n\r\nffffffffffffffff\r\nx",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: gzip, chunked\r\n\r\n0\r\n\r\n",
    b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nExpect: 100-continue\r\nContent-Length: 9\r\n\r\n",
    b"\x16\x03\x01\x02\x00\x01\x00\x01\xfc\x03\x03",
    b"PRI * HTTP/2.0\r\n\r\nSM\r\n\r\n",
)
"""Requests that are no HTTP, or that two programs read in two ways."""


NOT_IMPLEMENTED = frozenset({501})
"""What RFC 9112, section 6.1, asks a server to say of a transfer coding that it does not know."""


def _broken_http(chance: random.Random) -> Iterator[Attack]:
    for raw in chance.sample(RAW, 8):
        yield Attack(f"raw {raw[:30]!r}", "/", raw=raw, person=None, statuses=ANSWERED | NOT_IMPLEMENTED)
    chunk = b"f4240\r\n" + b" " * 1_000_000 + b"\r\n"
    head = b"POST /v1/loops HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: chunked\r\n\r\n"
    # the server stops reading past its own limit
    raw = head + chunk * chance.choice((1, 3, 6)) + b"0\r\n\r\n"
    yield Attack("chunks without end", "/v1/loops", raw=raw, headers=JSON, person=None)
