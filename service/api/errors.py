"""Every failure as one problem: the only place where an exception becomes a status (RFC 9457).

The exceptions of the documents and the records know nothing of HTTP. What is not in the tables is a fault
of ours: it is logged with the request's identifier, and the answer shows that identifier and nothing else.
"""

from __future__ import annotations

import logging
from collections.abc import Iterator

from flask import Response
from werkzeug.exceptions import HTTPException

from service.api import problems, refusals
from service.api.problems import ProblemType
from service.context import note_problem, request_id
from service.documents import errors as documents
from service.documents import writing
from service.records import errors as records
from service.records.database import CANNOT_BE_USED

LOG = logging.getLogger("service.api")
RETRY_AFTER_S = 5
PLACES_MAX = 100
"""Wrong places that one problem names: enough to mend a body, and no more than a body itself would take."""

TABLE: dict[type[Exception], ProblemType] = {
    refusals.BadQuery: problems.BAD_QUERY,
    refusals.BadHeader: problems.BAD_REQUEST,
    refusals.Stale: problems.PRECONDITION_FAILED,
    refusals.StateNotNamed: problems.PRECONDITION_REQUIRED,
    documents.NotJson: problems.NOT_JSON,
    documents.TooLarge: problems.TOO_LARGE,
    documents.InvalidDocument: problems.INVALID_FIELDS,
    records.NotAuthenticated: problems.UNAUTHENTICATED,
    records.TooManyAttempts: problems.TOO_MANY_REQUESTS,
    records.NotFound: problems.NOT_FOUND,
    records.NotAllowed: problems.FORBIDDEN,
    records.SigningRefused: problems.SIGNING_REFUSED,
    records.FieldErrors: problems.INVALID_FIELDS,
    records.IdempotencyKeyReused: problems.IDEMPOTENCY_KEY_REUSED,
    records.StaleContent: problems.PRECONDITION_FAILED,
    records.Conflict: problems.CONFLICT,
    records.SecondPersonNeeded: problems.SECOND_PERSON_NEEDED,
    records.StoreNotUsable: problems.UNAVAILABLE,
    **dict.fromkeys(CANNOT_BE_USED, problems.UNAVAILABLE),
}
"""The nearest class in an exception's own order of classes decides."""

OF_HTTP: dict[int, ProblemType] = {
    400: problems.BAD_REQUEST,
    404: problems.NOT_FOUND,
    405: problems.METHOD_NOT_ALLOWED,
    406: problems.NOT_ACCEPTABLE,
    413: problems.TOO_LARGE,
    415: problems.UNSUPPORTED_MEDIA_TYPE,
}
"""What the web framework refuses by itself, by its status."""


def answer(error: Exception) -> Response:
    """Return the problem that stands for any exception raised while a request was handled."""
    problem = problem_type(error)
    note_problem(problem.name)
    if problem.status >= 500:
        LOG.error("request %s failed", request_id(), exc_info=error, extra={"request_id": request_id()})
    response = Response(_body(problem, error), problem.status, content_type="application/problem+json")
    response.headers.extend(_headers(problem, error))
    return response


def problem_type(error: Exception) -> ProblemType:
    """Return the type of problem that an exception is."""
    if isinstance(error, HTTPException):
        otherwise = problems.BAD_REQUEST if (error.code or 500) < 500 else problems.INTERNAL_ERROR
        return OF_HTTP.get(error.code or 500, otherwise)
    found = (TABLE[kind] for kind in type(error).__mro__ if kind in TABLE)
    return next(found, problems.INTERNAL_ERROR)


def _body(problem: ProblemType, error: Exception) -> bytes:
    members = {
        "type": problem.path,
        "title": problem.title,
        "status": problem.status,
        "instance": f"urn:uuid:{request_id()}",
    }
    if problem.status < 500:
        places = getattr(error, "errors", ())
        members |= {"detail": _detail(problem, error, len(places)), "errors": places[:PLACES_MAX]}
    return writing.to_bytes(members)


def _detail(problem: ProblemType, error: Exception, places: int) -> str:
    if isinstance(error, HTTPException):
        # the framework's own words are about browsers, but for those that this service gave it
        return error.description or problem.meaning if error.code in (413, 415) else problem.meaning
    return f"{places} places are wrong; errors names them" if places > 1 else str(error)


def _headers(problem: ProblemType, error: Exception) -> Iterator[tuple[str, str]]:
    yield "Cache-Control", "no-store"
    if problem is problems.UNAUTHENTICATED:
        yield "WWW-Authenticate", 'Bearer realm="gain sign-off"'
    if problem is problems.UNAVAILABLE:
        yield "Retry-After", str(RETRY_AFTER_S)
    if isinstance(error, records.TooManyAttempts):
        yield "Retry-After", str(error.retry_after_s)
    if isinstance(error, HTTPException):
        yield from (
            (name, value) for name, value in error.get_headers() if name in ("Allow", "Accept-Encoding")
        )
