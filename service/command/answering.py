"""One request as text, one answer or one problem as what is printed."""

from __future__ import annotations

from dataclasses import dataclass

from service.documents.errors import DocumentError, FieldProblem, InvalidDocument, NotJson, TooLarge
from service.documents.reading import read
from service.documents.recomputations import RecomputationAnswer, RecomputationRequest, answer

PROBLEMS: dict[type[DocumentError], tuple[str, int]] = {
    TooLarge: ("The body is too large", 413),
    NotJson: ("The body is not JSON as this service reads it", 400),
    InvalidDocument: ("Fields of the body cannot be accepted", 422),
}
"""Why a request is refused → the title and status that the service gives over HTTP for the same."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Problem:
    """A request that is refused, in the shape of RFC 9457."""

    title: str
    status: int
    detail: str
    errors: tuple[FieldProblem, ...]


def answered(raw: bytes) -> RecomputationAnswer | Problem:
    """Answer one request, or say what is wrong with it."""
    try:
        return answer(read(RecomputationRequest, raw))
    except DocumentError as error:
        title, status = next(told for kind, told in PROBLEMS.items() if isinstance(error, kind))
        return Problem(title=title, status=status, detail=error.detail, errors=error.errors)
