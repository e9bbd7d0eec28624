"""What is wrong with a controller or a plant, and in which field; and what would be too much work."""

from __future__ import annotations


class FieldError(ValueError):
    """A value that no loop can have, with the path of field names and indices at which it stands.

    `path` is relative to the dataclass that raised it, e.g. ("integral", "unit"). It becomes part of a JSON
    pointer where the value came over HTTP.
    """

    def __init__(self, path: tuple[str | int, ...], detail: str) -> None:
        self.path = path
        self.detail = detail
        super().__init__(detail)


class WorkBoundError(Exception):
    """More work than the stated bound; what was asked for is not computed."""
