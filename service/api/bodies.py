"""The body of a request as plain objects, before any field of it is looked at."""

from __future__ import annotations

from flask import Request
from werkzeug.exceptions import RequestEntityTooLarge, UnsupportedMediaType

from service.api.refusals import BadHeader
from service.documents import strict_json
from service.documents.limits import BODY_BYTES_MAX
from service.documents.strict_json import Plain


def plain_body(request: Request) -> Plain:
    """Return the JSON of the body as plain objects.

    Raises UnsupportedMediaType, RequestEntityTooLarge, BadHeader, or NotJson from `service.documents`.
    """
    _check_headers(request)
    return strict_json.parse(request.get_data(cache=False))


def check_no_body(request: Request) -> None:
    """Refuse a body where none is read, rather than let its sender believe that it was."""
    if request.content_length or "Transfer-Encoding" in request.headers:
        raise BadHeader("this address takes no body with this method")


def _check_headers(request: Request) -> None:
    if request.mimetype != "application/json":
        raise UnsupportedMediaType("the body's Content-Type is application/json")
    if request.mimetype_params.get("charset", "utf-8").lower() not in ("utf-8", "utf8"):
        raise UnsupportedMediaType("the body is UTF-8")
    if request.headers.get("Content-Encoding", "identity").lower() != "identity":
        raise UnsupportedMediaType("a body with a Content-Encoding is not read; send it as it is")
    if (request.content_length or 0) > BODY_BYTES_MAX:
        raise RequestEntityTooLarge(f"the body has at most {BODY_BYTES_MAX} bytes")
