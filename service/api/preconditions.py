"""If-Match on what can change (RFC 9110, section 13.1.1; RFC 6585, section 3)."""

from __future__ import annotations

from flask import Request

from service.api.refusals import Stale, StateNotNamed
from service.documents import canonical, writing


def revision_etag(revision: int) -> str:
    """Return the entity tag of a resource that counts its revisions."""
    return f"revision-{revision}"


def content_etag(shown: object) -> str:
    """Return the entity tag of a resource that has no revisions, made from what is shown of it."""
    return canonical.digest(writing.plain(shown))[:32]


def check_match(request: Request, etag: str) -> None:
    """Refuse a change by somebody who has not seen the present state.

    `*` is refused too: it would let a change through that was made blindly. Raises StateNotNamed or Stale.
    """
    named = request.if_match
    if not named or named.star_tag:
        raise StateNotNamed("send the ETag of your last reading in If-Match")
    if not named.contains(etag):
        raise Stale("this was changed since you read it; read it again")
