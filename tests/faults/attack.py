"""One attack, and what it is made against."""

from __future__ import annotations

import json
from dataclasses import dataclass, field
from typing import Any

from service.pages.visits import COOKIE
from tests.pages import markup

JSON = {"Content-Type": "application/json"}
FORM = {"Content-Type": "application/x-www-form-urlencoded"}
SIGN_OUT = "/sign-out"
"""The one form that is left alone: it would end the session that all others need."""

REFUSED = frozenset(range(400, 500))
ANSWERED = frozenset(range(200, 500))


@dataclass(frozen=True)
class World:
    """What stands in the store that is attacked, and the passwords and tokens of who attacks."""

    tokens: dict[str, str]
    passwords: dict[str, str]
    loop: str
    submission: str
    digest: str
    session_cookie: str
    forms: dict[str, list[tuple[str, str]]] = field(default_factory=dict)
    """Address of each form that this person is shown → its fields, each with what stands in it."""


@dataclass(frozen=True)
class Attack:
    """One request. `person`: whose token it carries. `absent`: what may stand nowhere in the answer."""

    name: str
    path: str
    method: str = "POST"
    body: bytes | None = None
    headers: dict[str, str] = field(default_factory=dict)
    person: str | None = "both"
    statuses: frozenset[int] = REFUSED
    absent: bytes | None = None
    raw: bytes | None = None
    """Sent as it is in place of all of it, where the attack is on HTTP itself."""


def sent(name: str, path: str, body: Any, **more: Any) -> Attack:
    """An attack with a body of JSON, or with bytes that say so."""
    data = body if isinstance(body, bytes) else json.dumps(body).encode()
    return Attack(name, path, body=data, headers=JSON | more.pop("headers", {}), **more)


def page(name: str, world: World, path: str, method: str = "GET", **more: Any) -> Attack:
    """An attack on a page, by somebody who is signed in."""
    headers = {"Cookie": f"{COOKIE}={world.session_cookie}"} | more.pop("headers", {})
    more = {"statuses": ANSWERED, "person": None} | more
    return Attack(name, path, method, headers=headers, **more)


def forms_on(html: str) -> dict[str, list[tuple[str, str]]]:
    """The forms of a page by the address that they are sent to: their fields, and what stands in each."""
    return {
        form.get("action"): [
            (one.get("name"), one.get("value"))
            for tag in ("input", "textarea", "select")
            for one in form.all(tag)
            if "name" in one.attributes
        ]
        for form in markup.read(html).all("form", method="post")
        if form.get("action") != SIGN_OUT
    }
