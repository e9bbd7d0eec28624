"""Who is on the other side: the sign-in session behind the cookie, read anew at each request.

Every page but those in `OPEN` is refused without a session, and every form without its token, before any
handler runs: a new page is closed until it is named here.
"""

from __future__ import annotations

import hashlib
import hmac
import ipaddress
import logging
import secrets
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from datetime import datetime
from urllib.parse import urlsplit

from flask import g, request
from sqlalchemy.exc import SQLAlchemyError
from sqlalchemy.orm import Session
from werkzeug.wrappers import Response as AnyResponse

from service.context import note_account, services
from service.pages import forgery
from service.records import accounts, history, sign_ins
from service.records.database import CANNOT_BE_USED
from service.records.errors import NotAuthenticated
from service.records.roles import Actor
from service.records.sign_ins import PresentSession

LOG = logging.getLogger("service.pages")

OPEN = frozenset({"pages.sign_in", "pages.static", "pages.typeface"})
"""Pages that need no sign-in."""

COOKIE = "gain_signoff_session"
VISIT_COOKIE = "gain_signoff_visit"
"""Before sign-in: what the token of the sign-in form is bound to."""


@dataclass(frozen=True, slots=True)
class Visit:
    """A running request of a person who is signed in, inside one transaction."""

    session: Session
    actor: Actor
    now: datetime


def admit() -> None:
    """Let a request in, or raise NotAuthenticated or Forged. Runs before every page."""
    if request.endpoint in OPEN and request.endpoint != "pages.sign_in":
        return
    if request.endpoint != "pages.sign_in":
        g.present = _resume()
    if request.method == "POST":
        forgery.check(request, form_secret())


def recognise() -> None:
    """Find out who is signed in where no page was reached; nobody, where that cannot be told."""
    if present() is None:
        with suppress(NotAuthenticated, SQLAlchemyError):
            g.present = _resume()


def present() -> PresentSession | None:
    """The session of this request, None where nobody is signed in."""
    found: PresentSession | None = g.get("present")
    return found


@contextmanager
def reading() -> Iterator[Visit]:
    """One transaction that reads, for the person who is signed in."""
    store = services().database
    with store.reading() as session:
        yield Visit(session, signed_in().actor, store.now())


@contextmanager
def writing() -> Iterator[Visit]:
    """One transaction that writes; who acts is read in it once more: a role just taken away is gone."""
    store = services().database
    with store.writing() as session:
        account_id = signed_in().actor.account_id or ""
        yield Visit(session, accounts.actor_of(session, account_id), store.now())


def signed_in() -> PresentSession:
    """The session of this request. Raises NotAuthenticated where nobody is signed in."""
    found = present()
    if found is None:
        raise NotAuthenticated("nobody is signed in")
    return found


def form_secret() -> bytes:
    """What the token of this request's forms is made from."""
    found = present()
    if found is not None:
        return found.csrf_secret
    key = services().secret_key.encode()
    return hmac.new(key, f"visit {_visit()}".encode(), hashlib.sha256).digest()


def keep_visit(response: AnyResponse) -> None:
    """Give a visitor who is not signed in the cookie that the sign-in form is bound to."""
    if request.cookies.get(VISIT_COOKIE) != _visit():
        _set_cookie(response, VISIT_COOKIE, _visit())


def begin(response: AnyResponse, started: sign_ins.StartedSession) -> None:
    """Give the session's secret to the browser; what identified the visit before is dropped."""
    _set_cookie(response, COOKIE, started.secret)
    _drop_cookie(response, VISIT_COOKIE)


def end(response: AnyResponse) -> None:
    """Take the session's secret back from the browser."""
    _drop_cookie(response, COOKIE)


def is_demonstration() -> bool:
    """True where the store says of itself that everything in it is invented."""
    if "demonstration" not in g:
        with services().database.reading() as session:
            g.demonstration = history.is_demonstration(session)
    return bool(g.demonstration)


def _resume() -> PresentSession:
    store, secret = services().database, request.cookies.get(COOKIE)
    if not secret:
        raise NotAuthenticated("nobody is signed in")
    now = store.now()
    with store.reading() as session:
        found = sign_ins.resume(session, secret, now)
        g.demonstration = history.is_demonstration(session)
    note_account(found.actor.name)
    if found.use_is_due:
        _note_use(found, now)
    return found


def _note_use(found: PresentSession, now: datetime) -> None:
    try:
        with services().database.writing() as session:
            sign_ins.note_use(session, found.id, now)
    except CANNOT_BE_USED:
        # a session that is not noted as used ends too early and never too late; the page can be read
        LOG.warning("the use of a session could not be noted", exc_info=True)


def _visit() -> str:
    if "visit" not in g:
        kept = request.cookies.get(VISIT_COOKIE, "")
        g.visit = kept if len(kept) == 43 else secrets.token_urlsafe(32)
    visit: str = g.visit
    return visit


def _set_cookie(response: AnyResponse, name: str, value: str) -> None:
    response.set_cookie(name, value, httponly=True, samesite="Lax", secure=not _on_loopback())


def _drop_cookie(response: AnyResponse, name: str) -> None:
    response.delete_cookie(name, httponly=True, samesite="Lax", secure=not _on_loopback())


def _on_loopback() -> bool:
    """True where the browser runs on the machine itself and no one can listen, as in the demonstration."""
    host = urlsplit(f"//{request.host}").hostname or ""
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return host == "localhost"
