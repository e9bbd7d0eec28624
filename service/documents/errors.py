"""Why a document is refused, with the places. Nothing here knows of HTTP."""

from __future__ import annotations

from dataclasses import dataclass

from service.analysis.errors import FieldError


@dataclass(frozen=True, slots=True)
class FieldProblem:
    """One place in a document, as a JSON pointer (RFC 6901), and what is wrong there."""

    pointer: str
    detail: str


class DocumentError(ValueError):
    """A document that is refused; `errors` are the places where one can be named."""

    def __init__(self, detail: str, errors: tuple[FieldProblem, ...] = ()) -> None:
        self.detail = detail
        self.errors = errors
        super().__init__(detail)


class TooLarge(DocumentError):
    """More bytes than are read."""


class NotJson(DocumentError):
    """Not JSON as this service reads it: not UTF-8, a repeated key, NaN, a number past float64, too deep."""


class InvalidDocument(DocumentError):
    """JSON, but not the document that was asked for; all places are named."""

    def __init__(self, errors: tuple[FieldProblem, ...]) -> None:
        super().__init__(
            "; ".join(f"{problem.pointer or '/'}: {problem.detail}" for problem in errors), errors
        )


def pointer(path: tuple[str | int, ...]) -> str:
    """Write a path of names and indices as a JSON pointer (RFC 6901, section 3)."""
    return "".join("/" + str(step).replace("~", "~0").replace("/", "~1") for step in path)


def invalid_field(error: FieldError, at: tuple[str | int, ...] = ()) -> InvalidDocument:
    """Turn what a dataclass or the analysis refused into a refusal of the document that it stands in."""
    return InvalidDocument((FieldProblem(pointer(at + error.path), error.detail),))
