"""The API's description of itself (OpenAPI 3.1), made from the operations and what they read and send."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any

from flask import Blueprint, Flask, Response, current_app
from werkzeug.routing import Rule

from service.api import answers, idempotency, problems, queries
from service.api.answers import Answer
from service.api.operations import Changing, Computing, Operation, Reading
from service.api.people import Account
from service.api.problems import ProblemType
from service.api.queries import PageQuery
from service.api.representations import Loop
from service.documents import writing
from service.documents.engine import engine
from service.documents.schemas import Schemas, json_schemas

blueprint = Blueprint("openapi", __name__, url_prefix="/v1")

Json = dict[str, Any]

ABOUT = (
    "A tuning tool registers loops and models and submits gains; the service recomputes them by itself, a "
    "second person signs, and the sheet goes to the panel. Site procedure, local codes and licensed practice "
    "govern.\n\n"
    "Nothing is pushed: whoever waits for a decision reads the submission again, some times a minute, until "
    "its state is no longer one that awaits review. A POST that was not answered is sent again with the same "
    "Idempotency-Key and makes nothing twice. Of a list, the Link header leads to the next page. "
    "Refusals name every wrong place at once."
)
ALWAYS = (problems.UNAUTHENTICATED, problems.BAD_REQUEST, problems.UNAVAILABLE)
WITH_BODY = (
    problems.NOT_JSON,
    problems.INVALID_FIELDS,
    problems.TOO_LARGE,
    problems.UNSUPPORTED_MEDIA_TYPE,
    problems.IDEMPOTENCY_KEY_REUSED,
)
CHANGING = (problems.FORBIDDEN, problems.CONFLICT)
REPLACING = (problems.PRECONDITION_REQUIRED, problems.PRECONDITION_FAILED)
SIGNING = (problems.SIGNING_REFUSED, problems.PRECONDITION_FAILED, problems.TOO_MANY_REQUESTS)

SENT: Json = {
    "ETag": {"description": "Names this revision in If-Match.", "schema": {"type": "string"}},
    "Link": {"description": "The first and the next page (RFC 8288).", "schema": {"type": "string"}},
    "Location": {"description": "Where it stands.", "schema": {"type": "string"}},
}
"""Headers of answers that a program needs."""

SAID_OF_QUERIES = {
    "limit": "How many items at the most.",
    "cursor": "Where the page begins, as the Link header of the one before gives it.",
    "site": "Matched without regard to case.",
    "tag": "Matched without regard to case.",
    "since": "From this time on.",
    "until": "Before this time.",
    "actor": "Account name of whoever did it.",
    "kind": "Kind of entry, as the entries of the history name it.",
    "q": "Stands anywhere in tag or description.",
    "recheck_due": "What these gains were approved on has been changed since.",
    "left_otherwise": "Other gains than approved were left in the controller and not put right since.",
    "as_signed": "The bytes that were kept at the decision, in place of the present state.",
}
"""What a parameter asks for, where its name does not say it."""

PROBLEM_SCHEMA: Json = {
    "type": "object",
    "description": "A refusal (RFC 9457). Types are listed at /problems.",
    "required": ["type", "title", "status", "instance"],
    "properties": {
        "type": {"type": "string", "format": "uri-reference"},
        "title": {"type": "string"},
        "status": {"type": "integer"},
        "detail": {"type": "string"},
        "instance": {"type": "string", "format": "uri"},
        "errors": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["pointer", "detail"],
                "properties": {"pointer": {"type": "string"}, "detail": {"type": "string"}},
            },
        },
    },
}


@dataclass(frozen=True)
class Route:
    """One operation at its address, for one method."""

    path: str
    method: str
    tag: str
    operation: Operation


@blueprint.get("/openapi.json")
def show_description() -> Response:
    """Give this description. Open to all."""
    return answers.response(Answer(body=writing.to_bytes(description(current_app))))


def description(app: Flask) -> Json:
    """Return the OpenAPI 3.1 document of an application's operations."""
    routes = list(routes_of(app))
    schemas = _schemas(tuple(route.operation for route in routes))
    paths: dict[str, Json] = {}
    for route in routes:
        paths.setdefault(route.path, {})[route.method] = _operation(route, schemas)
    return {
        "openapi": "3.1.0",
        "info": {"title": "Gain sign-off service", "version": engine().service, "description": ABOUT},
        "servers": [{"url": "/"}],
        "security": [{"token": []}],
        "paths": paths,
        "components": {
            "schemas": schemas.definitions | {"Problem": PROBLEM_SCHEMA},
            "securitySchemes": {"token": {"type": "http", "scheme": "bearer"}},
        },
    }


def routes_of(app: Flask) -> Iterator[Route]:
    """Yield every operation of an application, by path."""
    for rule in sorted(app.url_map.iter_rules(), key=lambda rule: rule.rule):
        operation = app.view_functions[rule.endpoint]
        if isinstance(operation, Operation):
            yield Route(_path(rule), _method(rule), rule.endpoint.split(".")[0], operation)


def _schemas(operations: Iterable[Operation]) -> Schemas:
    operations = tuple(operations)
    bodies = {operation.body for operation in operations if isinstance(operation, Changing | Computing)}
    answered = {operation.answer for operation in operations if operation.answer is not None}
    return json_schemas(tuple(sorted(bodies, key=_name)), tuple(sorted(answered, key=_name)))


def _name(described: type) -> str:
    return described.__qualname__


def _path(rule: Rule) -> str:
    return re.sub(r"<(?:[^<>]+:)?(\w+)>", r"{\1}", rule.rule)


def _method(rule: Rule) -> str:
    (method,) = (rule.methods or set()) - {"HEAD", "OPTIONS"}
    return method.lower()


def _operation(route: Route, schemas: Schemas) -> Json:
    operation = route.operation
    described: Json = {
        "operationId": operation.__name__,
        "tags": [route.tag],
        "summary": operation.summary,
        "parameters": [*_path_parameters(route), *_query_parameters(operation), *_headers(route)],
        "responses": {str(operation.status): _success(operation, schemas)} | _refusals(route),
    }
    if isinstance(operation, Changing | Computing):
        content = {"application/json": {"schema": schemas.of_read[operation.body]}}
        described["requestBody"] = {"required": True, "content": content}
    return described


def _path_parameters(route: Route) -> Iterator[Json]:
    for name in re.findall(r"{(\w+)}", route.path):
        kind = "integer" if name == "number" else "string"
        yield {"name": name, "in": "path", "required": True, "schema": {"type": kind}}


def _query_parameters(operation: Operation) -> Iterator[Json]:
    if isinstance(operation, Reading):
        for name, schema in queries.schemas(operation.query).items():
            described = {"description": SAID_OF_QUERIES[name]} if name in SAID_OF_QUERIES else {}
            yield {"name": name, "in": "query", "required": False, **described, "schema": schema}


def _headers(route: Route) -> Iterator[Json]:
    if route.method == "post":
        text = "The same key and body give the first answer again."
        schema: Json = {"type": "string", "minLength": 1, "maxLength": idempotency.KEY_CHARACTERS_MAX}
        yield {"name": "Idempotency-Key", "in": "header", "description": text, "schema": schema}
    if route.method == "put":
        text = "The ETag of the last reading."
        yield {
            "name": "If-Match",
            "in": "header",
            "required": True,
            "description": text,
            "schema": {"type": "string"},
        }


def _success(operation: Operation, schemas: Schemas) -> Json:
    content: Json = {name: {} for name in operation.media_types}
    if "application/json" in content and operation.answer is not None:
        content["application/json"] = {"schema": _answer_schema(operation, schemas.of_written)}
    headers = {name: SENT[name] for name in _headers_sent(operation)}
    return {"description": operation.summary, "headers": headers, "content": content}


def _answer_schema(operation: Operation, of_written: dict[type, Json]) -> Json:
    schema = of_written[operation.answer] if operation.answer else {}
    if not operation.a_list:
        return schema
    items = {"type": "array", "items": schema}
    return {"type": "object", "required": ["items"], "properties": {"items": items}}


def _headers_sent(operation: Operation) -> Iterator[str]:
    if operation.status == 201:
        yield "Location"
    if operation.answer in (Loop, Account) and not operation.a_list:
        yield "ETag"
    if isinstance(operation, Reading) and issubclass(operation.query, PageQuery):
        yield "Link"


def _refusals(route: Route) -> Json:
    by_status: dict[str, list[ProblemType]] = {}
    for problem in _problems(route):
        by_status.setdefault(str(problem.status), []).append(problem)
    schema = {"$ref": "#/components/schemas/Problem"}
    return {
        status: {
            "description": "; ".join(f"{problem.name}: {problem.title}" for problem in found),
            "content": {"application/problem+json": {"schema": schema}},
        }
        for status, found in sorted(by_status.items())
    }


def _problems(route: Route) -> Iterator[ProblemType]:
    yield from ALWAYS
    yield problems.BAD_QUERY
    if "{" in route.path or isinstance(route.operation, Changing):
        yield problems.NOT_FOUND
    yield from route.operation.refuses
    if len(route.operation.media_types) > 1:
        yield problems.NOT_ACCEPTABLE
    if isinstance(route.operation, Changing | Computing):
        yield from WITH_BODY
    if isinstance(route.operation, Changing):
        yield from CHANGING
        yield from SIGNING if route.operation.trace else ()
    if route.method == "put":
        yield from REPLACING
    if route.method == "put" and route.operation.answer is Loop:
        yield problems.SECOND_PERSON_NEEDED
