"""Query parameters, read as strictly as bodies: unknown, repeated and malformed ones are refused by name.

A list's parameters are a frozen dataclass; the same dataclass makes their part of the API description.
"""

from __future__ import annotations

import dataclasses
import re
import unicodedata
from collections.abc import Hashable, Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import cache
from typing import Annotated, Any, TypeVar, cast

from annotated_types import Ge, Le, Len
from pydantic import AfterValidator, AwareDatetime, BeforeValidator, TypeAdapter, ValidationError
from werkzeug.datastructures import MultiDict

from service.api.refusals import BadQuery
from service.documents.errors import FieldProblem, pointer

PAGE_ITEMS_DEFAULT = 50
PAGE_ITEMS_MAX = 200

QueryT = TypeVar("QueryT")

_INSTANT = re.compile(r"\d{4}-\d\d-\d\d[Tt]\d\d:\d\d:\d\d(\.\d{1,6})?([Zz]|[+-]\d\d:\d\d)")


def _written_as_instant(text: str) -> str:
    # pydantic alone would also take a bare date and a count of seconds, and people would be unsure what
    # they got
    if not _INSTANT.fullmatch(text):
        raise ValueError("a time is written as in RFC 3339 with its offset, e.g. 2026-01-31T08:00:00Z")
    return text


def _in_utc(moment: datetime) -> datetime:
    try:
        return moment.astimezone(UTC)
    except OverflowError:
        raise ValueError("this lies before the year 1 or past the year 9999 in UTC") from None


def _without_controls(text: str) -> str:
    if any(unicodedata.category(character) == "Cc" for character in text):
        raise ValueError("no control characters stand in a text that is searched for")
    return text


Text = Annotated[str, Len(1, 200), AfterValidator(_without_controls)]
Instant = Annotated[AwareDatetime, BeforeValidator(_written_as_instant), AfterValidator(_in_utc)]


@dataclass(frozen=True, kw_only=True)
class NoQuery:
    """Takes no parameter at all."""


@dataclass(frozen=True, kw_only=True)
class PageQuery:
    """The part of a list that is asked for."""

    limit: Annotated[int, Ge(1), Le(PAGE_ITEMS_MAX)] = PAGE_ITEMS_DEFAULT
    cursor: Annotated[str, Len(1, 1000)] | None = None


def read(query_type: type[QueryT], parameters: MultiDict[str, str]) -> QueryT:
    """Return the parameters as `query_type`.

    An empty value is an absent one. Raises BadQuery, all faults at once.
    """
    problems = tuple(_misnamed(query_type, parameters))
    if problems:
        raise BadQuery(problems)
    present = {name: value for name, value in parameters.items() if value}
    try:
        query: QueryT = _adapter(cast(Hashable, query_type)).validate_strings(present)
        return query
    except ValidationError as invalid:
        raise BadQuery(tuple(_field_problems(invalid))) from None


def schemas(query_type: Any) -> dict[str, Any]:
    """Return the JSON schema of each parameter."""
    properties: dict[str, Any] = _adapter(query_type).json_schema().get("properties", {})
    return properties


def _misnamed(query_type: Any, parameters: MultiDict[str, str]) -> Iterator[FieldProblem]:
    known = {field.name for field in dataclasses.fields(query_type)}
    for name, values in parameters.lists():
        if name not in known:
            yield FieldProblem(pointer((name,)), "this is no query parameter here")
        elif len(values) > 1:
            yield FieldProblem(pointer((name,)), "this stands more than once")


@cache
def _adapter(query_type: Any) -> TypeAdapter[Any]:
    return TypeAdapter(query_type)


def _field_problems(invalid: ValidationError) -> list[FieldProblem]:
    found = invalid.errors(include_url=False, include_input=False)
    return [
        FieldProblem(f"/{error['loc'][0]}", error["msg"].removeprefix("Value error, ")) for error in found
    ]
