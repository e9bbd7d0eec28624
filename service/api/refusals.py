"""What HTTP itself refuses, before or beside the rules of the records."""

from __future__ import annotations

from service.documents.errors import FieldProblem


class BadQuery(Exception):
    """Query parameters that cannot be read; each problem's pointer names a parameter."""

    def __init__(self, errors: tuple[FieldProblem, ...]) -> None:
        self.errors = errors
        super().__init__("; ".join(f"{error.pointer[1:]} {error.detail}" for error in errors))

    @classmethod
    def of(cls, parameter: str, detail: str) -> BadQuery:
        """Return the refusal of one parameter."""
        return cls((FieldProblem(f"/{parameter}", detail),))


class BadHeader(Exception):
    """A header that cannot be read, said in a sentence."""


class Stale(Exception):
    """If-Match names a state that is no longer the present one."""


class StateNotNamed(Exception):
    """A change came without If-Match."""
