"""Every failure as a page in a calm voice: the only place where an exception becomes a status for people.

What is not in the table is a fault of ours: it is logged with the request's identifier, and the page shows
that identifier and nothing of the fault.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass

from flask import Response, request
from werkzeug.exceptions import HTTPException

from service.context import request_id
from service.documents.errors import DocumentError
from service.pages import forgery, forms, sign_in, visits
from service.pages.forms import Form
from service.pages.frame import page
from service.records import errors as records
from service.records.database import CANNOT_BE_USED

LOG = logging.getLogger("service.pages")


@dataclass(frozen=True, slots=True)
class Failure:
    """How one kind of failure is told."""

    status: int
    title: str
    sentence: str = ""
    """Empty: the exception's own sentence is shown."""


FAULT = Failure(
    500,
    "Something went wrong here",
    "The fault is ours, not yours. Nothing was half recorded: what you sent is recorded whole or not at all. "
    "Look at the record before you send it again.",
)
NOT_THERE = Failure(
    404,
    "There is no such page",
    "It does not exist, or it lies outside the areas that your account sees.",
)
FORGED = Failure(
    403,
    "This form was not accepted",
    "It did not come from a page that this service showed you. Nothing was recorded. "
    "Open the page again and send it from there.",
)
UNAVAILABLE = Failure(
    503,
    "The records cannot be reached",
    "Nothing was recorded. Try again in a minute or tell the administrator.",
)

TABLE: dict[type[Exception], Failure] = {
    forgery.Forged: FORGED,
    records.NotFound: NOT_THERE,
    records.NotAllowed: Failure(403, "This is not yours to do"),
    records.FieldErrors: Failure(422, "Something in this cannot be accepted"),
    records.StaleContent: Failure(412, "This has changed since you read it"),
    records.Conflict: Failure(409, "The present state does not allow this"),
    records.StoreNotUsable: UNAVAILABLE,
    **dict.fromkeys(CANNOT_BE_USED, UNAVAILABLE),
    DocumentError: Failure(422, "Something in this cannot be read"),
}
"""The nearest class in an exception's own order of classes decides."""

OF_HTTP: dict[int, Failure] = {
    400: Failure(
        400, "This request cannot be read", "The address or the form is damaged. Go back and try again."
    ),
    404: NOT_THERE,
    405: Failure(405, "This address takes no such request", "Open the page and use its buttons."),
    413: Failure(
        413, "This is too long", "More was sent than any form here needs. Shorten it and send it again."
    ),
}
"""What the web framework refuses by itself, by its status."""


def answer(error: Exception) -> Response:
    """The page that stands for any exception raised while a request was handled."""
    if isinstance(error, records.NotAuthenticated):
        return _ask_to_sign_in()
    visits.recognise()
    failure = failure_of(error)
    if failure.status >= 500:
        LOG.error("request %s failed", request_id(), exc_info=error, extra={"request_id": request_id()})
    sentence = failure.sentence or forms.sentence(str(error))
    response = page("error.html", failure.status, failure=failure, sentence=sentence, request_id=request_id())
    if isinstance(error, HTTPException):
        response.headers.extend((name, value) for name, value in error.get_headers() if name == "Allow")
    return response


def failure_of(error: Exception) -> Failure:
    """How an exception is told."""
    if isinstance(error, HTTPException):
        return OF_HTTP.get(error.code or 500, FAULT)
    found = (TABLE[kind] for kind in type(error).__mro__ if kind in TABLE)
    return next(found, FAULT)


def _ask_to_sign_in() -> Response:
    """The sign-in form in place of the page that was asked for, which follows it."""
    if request.method == "GET":
        return sign_in.form_page(Form({"next": request.full_path.removesuffix("?")}), status=401)
    lost = forms.posted() if forgery.from_this_site(request) else None
    return sign_in.form_page(Form(), status=401, lost=lost)
