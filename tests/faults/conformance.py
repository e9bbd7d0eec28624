"""Whether an answer is one that the served description promises, whatever was asked."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import jsonschema_rs

Json = dict[str, Any]

PROBLEM = "application/problem+json"
BY_THE_FRAMEWORK = frozenset({404, 405})
"""What an address answers before the operation is known."""


@dataclass(frozen=True)
class Answer:
    """What came back. Names of headers in lower case."""

    status: int
    headers: Mapping[str, str]
    body: bytes

    @property
    def media_type(self) -> str:
        """The content type without parameters."""
        return self.headers.get("content-type", "").partition(";")[0].strip().lower()


@dataclass(frozen=True)
class Description:
    """The OpenAPI document as it was served."""

    document: Json

    def departures(self, method: str, path: str, answer: Answer) -> Iterator[str]:
        """Say in which ways an answer is none that the description promises; `path` without its query."""
        if answer.status >= 500:
            yield f"the answer is {answer.status}"
        if not path.startswith("/v1/"):
            return
        if answer.status >= 400:
            yield from self._of_problem(answer)
        # HEAD is GET without the body
        operation = self._operation("get" if method == "HEAD" else method.lower(), path)
        if operation is None:
            if answer.status < 400:
                yield f"{answer.status} from an address and method that are not described"
            return
        described = operation["responses"].get(str(answer.status))
        if described is None:
            if answer.status not in BY_THE_FRAMEWORK:
                yield f"{answer.status} is not described here"
        elif answer.status < 400 and method != "HEAD":
            yield from self._of_success(described["content"], answer)

    @cached_property
    def _operations(self) -> list[tuple[re.Pattern[str], Json]]:
        """Addresses as patterns, those without a place to fill in first."""
        paths = sorted(self.document["paths"].items(), key=lambda item: item[0].count("{"))
        return [(re.compile(re.sub(r"{\w+}", "[^/]+", path)), methods) for path, methods in paths]

    def _operation(self, method: str, path: str) -> Json | None:
        methods = next((methods for pattern, methods in self._operations if pattern.fullmatch(path)), {})
        found: Json | None = methods.get(method)
        return found

    def _of_problem(self, answer: Answer) -> Iterator[str]:
        if answer.media_type != PROBLEM:
            yield f"a refusal is {answer.media_type or 'of no type'}"
        elif answer.body:
            yield from self._by_schema({"$ref": "#/components/schemas/Problem"}, answer.body)
            if json.loads(answer.body).get("status") != answer.status:
                yield "the problem tells another status"

    def _of_success(self, content: Json, answer: Answer) -> Iterator[str]:
        if answer.media_type not in content:
            yield f"{answer.media_type or 'no type'} is not described here"
        elif answer.media_type == "application/json":
            yield from self._by_schema(content[answer.media_type].get("schema", {}), answer.body)

    def _by_schema(self, schema: Json, body: bytes) -> Iterator[str]:
        try:
            value = json.loads(body, parse_constant=_refused)
        except ValueError as wrong:
            yield f"the body is no JSON: {wrong}"
            return
        errors = self._validator(json.dumps(schema)).iter_errors(value)
        yield from (f"{error.message} at {error.instance_path}"[:300] for error in errors)

    def _validator(self, schema: str) -> jsonschema_rs.Draft202012Validator:
        if schema not in self._validators:
            whole = json.loads(schema) | {"components": self.document["components"]}
            self._validators[schema] = jsonschema_rs.Draft202012Validator(whole)
        return self._validators[schema]

    @cached_property
    def _validators(self) -> dict[str, jsonschema_rs.Draft202012Validator]:
        return {}


def _refused(name: str) -> None:
    raise ValueError(f"{name} is no number")
