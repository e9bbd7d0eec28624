"""Every page in its frame: the head and foot round it, and the headers it goes with."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime

from flask import Response, make_response, render_template, request, url_for
from markupsafe import Markup
from sqlalchemy.exc import SQLAlchemyError

from service.context import services
from service.pages import forgery, visits

HEADERS = {
    "Content-Security-Policy": (
        "default-src 'none'; script-src 'none'; style-src 'self'; font-src 'self'; img-src 'self'; "
        "form-action 'self'; frame-ancestors 'none'; base-uri 'none'"
    ),
    # the origin of our own forms is sent, so that it can be checked; nothing is sent elsewhere
    "Referrer-Policy": "same-origin",
    "Cache-Control": "no-store",
}
SECTIONS = (("pages.home", "For review"), ("pages.loops", "Loops"), ("pages.history", "History"))


@dataclass(frozen=True, slots=True)
class Section:
    """One entry of the navigation."""

    name: str
    address: str
    current: bool


@dataclass(frozen=True, slots=True)
class Frame:
    """What stands round a page."""

    demonstration: bool
    person: str
    """Empty where nobody is signed in."""
    sections: tuple[Section, ...]
    read_at: datetime


def page(template: str, status: int = 200, **content: object) -> Response:
    """A page with its frame and its headers."""
    html = render_template(template, frame=_frame(), token_field=_token_field(), **content)
    response = make_response(html, status)
    response.headers.update(HEADERS)
    return response


def _frame() -> Frame:
    present = visits.present()
    person = f"{present.actor.full_name}, {' and '.join(sorted(present.actor.roles))}" if present else ""
    sections = tuple(
        Section(name, url_for(endpoint), request.endpoint == endpoint) for endpoint, name in SECTIONS
    )
    return Frame(_demonstration(), person, sections, services().database.now())


def _demonstration() -> bool:
    try:
        return visits.is_demonstration()
    except SQLAlchemyError:  # the page that says so must not fail for the same reason
        return False


def _token_field() -> Callable[[], Markup]:
    def token_field() -> Markup:
        token = forgery.token(visits.form_secret())
        return Markup('<input type="hidden" name="{}" value="{}">').format(forgery.TOKEN_FIELD, token)

    return token_field
