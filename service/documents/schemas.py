"""JSON schemas (2020-12) of documents, made from the dataclasses that read and write them.

The text under a field is its description. What pydantic cannot see in the dataclasses is added: unknown
fields are refused, a controller in a record is complete (`service.documents.complete`), and what is left out
where it is empty is not required (`service.documents.writing`). Rules that join several fields stay with the
dataclasses alone.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from typing import Any

from pydantic import ConfigDict, TypeAdapter
from pydantic.json_schema import JsonSchemaMode

from service.documents import complete
from service.documents.examples import EXAMPLES
from service.documents.writing import LEFT_OUT_WHEN_EMPTY

Json = dict[str, Any]
COMPONENTS = "#/components/schemas/{model}"
"""Where OpenAPI keeps definitions."""

COMPLETE_CONTROLLER: Json = {
    "description": "In a record nothing of a controller is left to a default; null says that there is none.",
    "if": {"properties": {"form": {"const": "two_zeros"}}},
    "then": {"required": list(complete.TWO_ZEROS)},
    "else": {"required": list(complete.TIME_TERMS)},
}
_CONTROLLER_FIELDS = frozenset(("controller", "as_found", "as_left"))


@dataclass(frozen=True)
class Schemas:
    """Schemas of what is read and of what is written, by type, and the definitions that they refer to."""

    of_read: dict[type, Json]
    of_written: dict[type, Json]
    definitions: Json


@cache
def json_schemas(
    reads: tuple[type, ...], writes: tuple[type, ...], ref_template: str = COMPONENTS
) -> Schemas:
    """Describe documents that are read and dataclasses that are written, with shared parts named once."""
    wanted: list[tuple[type, JsonSchemaMode, TypeAdapter[Any]]] = [
        *((document, "validation", _several(document)) for document in reads),
        *((view, "serialization", _several(view)) for view in writes),
    ]
    by_type, shared = TypeAdapter.json_schemas(wanted, ref_template=ref_template)
    made = Schemas(
        of_read={document: by_type[document, "validation"]["items"] for document in reads},
        of_written={view: by_type[view, "serialization"]["items"] for view in writes},
        definitions=shared.get("$defs", {}),
    )
    _describe_reading(made)
    _describe_writing(made.definitions)
    return made


def _several(described: type) -> TypeAdapter[Any]:
    # a standard dataclass has no settings of its own and takes those of what holds it
    several = tuple[described, ...]  # type: ignore[valid-type]  # which one is known only here
    return TypeAdapter(several, config=ConfigDict(use_attribute_docstrings=True))


def _describe_reading(made: Schemas) -> None:
    for document, schema in made.of_read.items():
        reached = list(_reached(schema, made.definitions))
        for part in reached:
            part.setdefault("additionalProperties", False)
        if hasattr(document, "missing"):
            _demand_complete_controllers(reached)
        if document in EXAMPLES:
            _named(schema, made.definitions)["examples"] = [EXAMPLES[document]]


def _demand_complete_controllers(parts: Iterable[Json]) -> None:
    for part in parts:
        for name in _CONTROLLER_FIELDS & part["properties"].keys():
            controller = part["properties"][name]
            part["properties"][name] = {"allOf": [controller, _unless_null(controller)]}


def _unless_null(schema: Json) -> Json:
    """Ask for a complete controller; of a field that may be null, unless it is null."""
    may_be_null = {"type": "null"} in schema.get("anyOf", ())
    return {"anyOf": [COMPLETE_CONTROLLER, {"type": "null"}]} if may_be_null else COMPLETE_CONTROLLER


def _describe_writing(definitions: Json) -> None:
    for sparse, names in LEFT_OUT_WHEN_EMPTY.items():
        schema = definitions.get(sparse.__name__, {})
        schema["required"] = [name for name in schema.get("required", ()) if name not in names]


def _reached(schema: Json, definitions: Json) -> list[Json]:
    """Every object with properties that a schema leads to, each once."""
    found: dict[int, Json] = {}
    waiting: list[Any] = [schema]
    while waiting:
        part = waiting.pop()
        if isinstance(part, list):
            waiting.extend(part)
        elif isinstance(part, dict) and id(part) not in found:
            found[id(part)] = part
            waiting.extend(part.values())
            waiting.append(_named(part, definitions))
    return [part for part in found.values() if isinstance(part.get("properties"), dict)]


def _named(schema: Json, definitions: Json) -> Json:
    """The definition that a schema refers to, or the schema itself."""
    target: Json = definitions.get(str(schema.get("$ref", "")).rsplit("/", 1)[-1], schema)
    return target
