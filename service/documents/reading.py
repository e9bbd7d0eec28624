"""Plain objects to the frozen dataclasses, strictly, with every wrong place named in one reply."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from functools import cache
from typing import TYPE_CHECKING, Any, TypeVar, cast

from service.analysis.errors import FieldError
from service.documents.errors import FieldProblem, InvalidDocument, pointer
from service.documents.strict_json import Plain, parse

if TYPE_CHECKING:
    from pydantic import TypeAdapter
    from pydantic_core import ErrorDetails

Document = TypeVar("Document")
Path = tuple[str | int, ...]


def read(document_type: type[Document], source: bytes | Plain) -> Document:
    """Read one document from JSON text, or from the plain objects that `strict_json.parse` made of one.

    A document type may have a static method `missing(plain)`, which names what it asks for beyond its fields.
    Raises NotJson or TooLarge for the text, InvalidDocument with all places for its meaning.
    """
    plain = parse(source) if isinstance(source, bytes) else source
    problems = list(_missing(document_type, plain))
    document = _validated(document_type, plain, problems)
    if problems:
        raise InvalidDocument(tuple(sorted(set(problems), key=lambda problem: problem.pointer)))
    return cast(Document, document)


def read_kept(document_type: type[Document], kept: bytes) -> Document:
    """Read back the canonical JSON that a document of this type was kept as.

    What it asks for beyond its fields was asked for before it was kept.
    """
    return cast(Document, adapter(document_type).validate_json(kept))  # type: ignore[arg-type]  # see `_validated`


@cache
def adapter(document_type: type[Any]) -> TypeAdapter[Any]:
    """Return the reader of a document type, made once: making it costs some 40 ms."""
    from pydantic import ConfigDict, TypeAdapter  # noqa: PLC0415  some 100 ms that not every command needs
    from typing_extensions import TypeAliasType  # noqa: PLC0415  comes with pydantic

    # pydantic takes no configuration for a dataclass itself, and a name for it is no dataclass
    named: Any = TypeAliasType("Document", document_type)
    strict = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False)
    return TypeAdapter(named, config=strict)


def _missing(document_type: type[Any], plain: Plain) -> Iterator[FieldProblem]:
    demands: Callable[[Plain], Iterator[FieldProblem]] | None = getattr(document_type, "missing", None)
    return iter(()) if demands is None else demands(plain)


def _validated(document_type: type[Any], plain: Plain, problems: list[FieldProblem]) -> Any:
    from pydantic import ValidationError  # noqa: PLC0415  see `adapter`

    try:
        # as JSON again, not as Python objects: only there does strict reading take an array for a tuple
        reader = adapter(document_type)  # type: ignore[arg-type]  # a class can be hashed; mypy does not see it
        return reader.validate_json(json.dumps(plain, allow_nan=False))
    except ValidationError as error:
        problems.extend(_problems(error.errors(include_url=False, include_input=False), plain))
        return None


def _problems(errors: list[ErrorDetails], plain: Plain) -> list[FieldProblem]:
    """One problem a place; alternatives of a union are joined, and dropped where one of them was meant."""
    details: dict[Path, list[str]] = {}
    for error in errors:
        path = _path(error, plain)
        sentence = _sentence(error)
        if sentence not in details.setdefault(path, []):
            details[path].append(sentence)
    alternatives = {_path(error, plain) for error in errors if _is_alternative(error)}
    # by all prefixes at once: a body may have tens of thousands of wrong places
    above = {path[:length] for path in details for length in range(len(path))}
    dropped = alternatives & above
    return [
        FieldProblem(pointer(path), " or ".join(found))
        for path, found in details.items()
        if path not in dropped
    ]


def _path(error: ErrorDetails, plain: Plain) -> Path:
    """Follow the location through the document: what is no name in it is the mark of a union's member."""
    path: Path = ()
    place: Plain = plain
    for step in error["loc"]:
        if isinstance(place, dict) and step in place:
            place = place[str(step)]
        elif isinstance(place, list) and isinstance(step, int) and step < len(place):
            place = place[step]
        elif error["type"] not in _MISSING or step != error["loc"][-1]:
            continue
        path = (*path, step)
    return path + _path_within(error)


def _path_within(error: ErrorDetails) -> Path:
    cause = error.get("ctx", {}).get("error")
    if isinstance(cause, FieldError):
        return cause.path
    return ("form",) if _tag_field(error) == "'form'" else ("kind",) if _tag_field(error) == "'kind'" else ()


def _tag_field(error: ErrorDetails) -> str | None:
    return error.get("ctx", {}).get("discriminator") if error["type"].startswith("union_tag") else None


def _is_alternative(error: ErrorDetails) -> bool:
    return error["type"] == "literal_error" or error["type"].endswith("_type")


_MISSING = ("missing", "missing_argument", "missing_keyword_only_argument")

_SENTENCES: dict[str, str] = {
    "missing": "this field is missing",
    "missing_argument": "this field is missing",
    "missing_keyword_only_argument": "this field is missing",
    "unexpected_keyword_argument": "there is no such field here",
    "extra_forbidden": "there is no such field here",
    "float_type": "a number is wanted",
    "float_parsing": "a number is wanted",
    "int_type": "a whole number is wanted",
    "int_from_float": "a whole number is wanted",
    "bool_type": "true or false is wanted",
    "string_type": "a text is wanted",
    "tuple_type": "an array is wanted",
    "dict_type": "an object is wanted",
    "dataclass_type": "an object is wanted",
    "none_required": "null is wanted",
    "finite_number": "a finite number is wanted",
    "greater_than": "the value is greater than {gt:g}",
    "greater_than_equal": "the value is {ge:g} or more",
    "less_than": "the value is less than {lt:g}",
    "less_than_equal": "the value is {le:g} or less",
    "literal_error": "one of these is wanted: {expected}",
    "union_tag_invalid": "one of these is wanted: {expected_tags}",
    "union_tag_not_found": "this field is missing",
    "string_too_short": "at least {min_length} characters are wanted",
    "string_too_long": "at most {max_length} characters are allowed",
    "string_pattern_mismatch": "the text has another shape than is wanted here",
    "too_short": "at least {min_length} items are wanted",
    "too_long": "at most {max_length} items are allowed",
    "datetime_type": "a time in RFC 3339 is wanted",
    "datetime_parsing": "a time in RFC 3339 is wanted",
    "datetime_from_date_parsing": "a time in RFC 3339 is wanted",
    "datetime_object_invalid": "a time in RFC 3339 is wanted",
    "timezone_aware": "a time has its offset from UTC",
}
"""pydantic's type of error → our sentence. What is not here keeps pydantic's words."""


def _sentence(error: ErrorDetails) -> str:
    context = error.get("ctx", {})
    cause = context.get("error")
    if isinstance(cause, FieldError):
        return cause.detail
    if isinstance(cause, ValueError):
        return str(cause)
    if (
        error["type"] == "too_short"
        and error["msg"].startswith("Tuple")
        and context.get("min_length") is None
    ):
        return error["msg"]
    return _SENTENCES.get(error["type"], error["msg"]).format(**context)
