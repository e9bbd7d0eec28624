"""Whether a form was sent from a page of ours: its token, and what the browser says of its origin.

A token is made from a secret of the session (before sign-in: of the visit) and stands in every form. A
browser also says where a form comes from (Origin; Sec-Fetch-Site of the W3C's Fetch Metadata); where it says
another place, the form is refused even with the right token.
"""

from __future__ import annotations

import hashlib
import hmac
from urllib.parse import urlsplit

from flask import Request

TOKEN_FIELD = "token"  # noqa: S105  the name of the field, not a token
_PURPOSE = b"gain sign-off: forms"


class Forged(Exception):
    """The form does not come from a page that this person was shown."""


def token(secret: bytes) -> str:
    """The token of all forms of a session: 64 hex digits."""
    return hmac.new(secret, _PURPOSE, hashlib.sha256).hexdigest()


def check(request: Request, secret: bytes) -> None:
    """Raise Forged unless the form carries the token of `secret` and comes from this very site."""
    sent = request.form.get(TOKEN_FIELD, "")
    if not from_this_site(request) or not hmac.compare_digest(sent.encode(), token(secret).encode()):
        raise Forged


def from_this_site(request: Request) -> bool:
    """False where the browser says that the request was started elsewhere."""
    origin = request.headers.get("Origin")
    if origin is not None and urlsplit(origin).netloc.lower() != request.host.lower():
        return False
    return request.headers.get("Sec-Fetch-Site", "same-origin") == "same-origin"
