"""JSON schemas (2020-12) of what operations read and send, with the parts that they share named once."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from typing import Any

from pydantic import TypeAdapter
from pydantic.json_schema import JsonSchemaMode

from service.api.operations import Changing, Computing, Operation, Reading

Json = dict[str, Any]
_REFERENCE = "#/components/schemas/{model}"


@dataclass(frozen=True)
class Schemas:
    """Schemas by type and direction, and the definitions that they refer to."""

    by_type: dict[tuple[type, JsonSchemaMode], Json]
    definitions: Json

    def body(self, operation: Changing | Computing) -> Json:
        """Return the schema of what an operation reads."""
        return self.by_type[operation.body, "validation"]

    def answer(self, operation: Operation) -> Json:
        """Return the schema of what an operation answers with."""
        assert operation.answer is not None  # noqa: S101  the caller asks for JSON only
        schema = self.by_type[operation.answer, "serialization"]
        if not operation.a_list:
            return schema
        items = {"type": "array", "items": schema}
        return {"type": "object", "required": ["items"], "properties": {"items": items}}

    def query(self, operation: Reading) -> Json:
        """Return the schema of each query parameter."""
        properties: Json = TypeAdapter(operation.query).json_schema().get("properties", {})
        return properties


def of(operations: Iterable[Operation]) -> Schemas:
    """Return the schemas of everything that the operations read and send."""
    operations = tuple(operations)
    bodies = {operation.body for operation in operations if isinstance(operation, Changing | Computing)}
    answers = {operation.answer for operation in operations if operation.answer is not None}
    return _made(tuple(sorted(bodies, key=_name)), tuple(sorted(answers, key=_name)))


@cache
def _made(bodies: tuple[type, ...], answers: tuple[type, ...]) -> Schemas:
    wanted: list[tuple[type, JsonSchemaMode, TypeAdapter[Any]]] = [
        *((body, "validation", TypeAdapter(body)) for body in bodies),
        *((answer, "serialization", TypeAdapter(answer)) for answer in answers),
    ]
    by_type, shared = TypeAdapter.json_schemas(wanted, ref_template=_REFERENCE)
    definitions = shared.get("$defs", {})
    for body in bodies:
        _close(by_type[body, "validation"], definitions, set())
    return Schemas(by_type=dict(by_type), definitions=definitions)


def _close(schema: Any, definitions: Json, closed: set[str]) -> None:
    """Say of every object that a body may hold that it has no further members: unknown fields are refused."""
    if isinstance(schema, list):
        for part in schema:
            _close(part, definitions, closed)
    if not isinstance(schema, dict):
        return
    name = str(schema.get("$ref", "")).rsplit("/", 1)[-1]
    if name in definitions and name not in closed:
        closed.add(name)
        _close(definitions[name], definitions, closed)
    if "properties" in schema:
        schema.setdefault("additionalProperties", False)
    for part in schema.values():
        _close(part, definitions, closed)


def _name(described: type) -> str:
    return f"{described.__module__}.{described.__qualname__}"
