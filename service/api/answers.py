"""What a handler returns: bytes with status and headers, so that an answer can be kept and given again."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import TypeVar
from urllib.parse import urlencode

from flask import Request, Response, request
from werkzeug.exceptions import NotAcceptable

from service.api import cursors
from service.api.queries import PageQuery
from service.context import services
from service.documents import writing
from service.records.views import Page

ItemT = TypeVar("ItemT")


@dataclass(frozen=True, kw_only=True)
class Answer:
    """One answer, not yet bound to a request."""

    body: bytes
    status: int = 200
    media_type: str = "application/json"
    location: str | None = None
    etag: str | None = None
    link: str | None = None
    file_name: str | None = None
    kept_body: bytes | None = None
    """What is kept under an Idempotency-Key in place of a body that holds a secret."""


def document(
    view: object, *, status: int = 200, location: str | None = None, etag: str | None = None
) -> Answer:
    """Answer with a frozen dataclass as JSON."""
    return Answer(body=writing.to_bytes(view), status=status, location=location, etag=etag)


def page(part: Page[ItemT], show: Callable[[ItemT], object]) -> Answer:
    """Answer with one page of a list, and with links to the first and to the next one."""
    items = [show(item) for item in part.items]
    return Answer(body=writing.to_bytes({"items": items}), link=links(part))


def links(part: Page[ItemT]) -> str:
    """Return the Link header of a page (RFC 8288)."""
    first = _link("first", None)
    if part.after is None:
        return first
    return f"{first}, {_link('next', cursors.make(services().secret_key, list_name(), part.after))}"


def whole_list(items: Iterable[ItemT], show: Callable[[ItemT], object]) -> Answer:
    """Answer with a list that is short by its nature and therefore not paged."""
    return Answer(body=writing.to_bytes({"items": [show(item) for item in items]}))


def as_it_is(view: ItemT) -> ItemT:
    """Show a view that needs no other shape in JSON than its own."""
    return view


def after(query: PageQuery) -> str | None:
    """Return the place after which the page begins, None for the first page. Raises BadQuery."""
    return cursors.read(services().secret_key, list_name(), query.cursor) if query.cursor else None


def preferred(request: Request, offered: tuple[str, ...]) -> str:
    """Return the media type among those offered that Accept asks for. Raises NotAcceptable."""
    if "Accept" not in request.headers:
        return offered[0]
    best = request.accept_mimetypes.best_match(offered)
    if best is None:
        raise NotAcceptable
    return best


def list_name() -> str:
    """Name the list of the present request: its path with its filters, without the part that is asked for."""
    return f"{request.path}?{urlencode(_filters())}"


def response(answer: Answer) -> Response:
    """Bind an answer to the present request."""
    made = Response(answer.body, answer.status, content_type=answer.media_type)
    made.headers["Cache-Control"] = "no-store"
    for header, value in (("Location", answer.location), ("Link", answer.link)):
        if value:
            made.headers[header] = value
    if answer.etag:
        made.set_etag(answer.etag)
    if answer.file_name:
        made.headers.set("Content-Disposition", "inline", filename=answer.file_name)
    return made


def _filters() -> list[tuple[str, str]]:
    return sorted(
        (name, value) for name, value in request.args.items() if name not in ("limit", "cursor") and value
    )


def _link(relation: str, cursor: str | None) -> str:
    # relative, so that no header of the request decides where the link leads
    place = {"limit": request.args.get("limit"), "cursor": cursor}
    query = urlencode([*_filters(), *((name, value) for name, value in place.items() if value)])
    return f'<{request.path}{"?" + query if query else ""}>; rel="{relation}"'
