"""Requests that schemathesis makes up from the served OpenAPI document, right by it and wrong by it."""

from __future__ import annotations

import random
from collections.abc import Iterator, Mapping
from typing import Any

import schemathesis
from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis.strategies import SearchStrategy
from schemathesis import Case, GenerationMode, Response
from schemathesis.core.failures import Failure, FailureGroup
from schemathesis.core.parameters import ParameterLocation
from schemathesis.specs.openapi import checks

from tests.faults.conformance import Json

CASES_AT_ONCE = 5
"""Drawn for one operation before the next one's turn comes."""

KNOWN_SHARE = 0.7
"""Share of the requests whose address names what is there."""

CHECKS: list[Any] = [
    checks.status_code_conformance,
    checks.content_type_conformance,
    checks.response_headers_conformance,
    checks.response_schema_conformance,
]
"""What schemathesis itself looks at, beside our own reading of the document."""


def cases(document: Json, tokens: Mapping[str, str], known: Mapping[str, str], number: int) -> Iterator[Case]:
    """Cases without end, some of each operation at a time; the number says which.

    `tokens`: credentials, of which each case has one or none. `known`: what variables of an address may name.
    """
    schema = schemathesis.openapi.from_dict(document)
    operations = [found.ok() for found in schema.get_all_operations()]
    chance = random.Random(number)  # noqa: S311  no secret is made of it
    while True:
        number += 1
        chance.shuffle(operations)
        for operation in operations:
            for mode in (GenerationMode.POSITIVE, GenerationMode.NEGATIVE):
                for case in _drawn(operation.as_strategy(mode), number):
                    _point_at_what_is_there(case, tokens, known, chance)
                    yield case


def failures(case: Case, response: Response) -> Iterator[str]:
    """What schemathesis finds wrong with an answer, and a wrong body that was taken."""
    try:
        case.validate_response(response, checks=CHECKS)
    except (Failure, FailureGroup) as found:
        yield " ".join(str(found).split())[:600]
    body = None if case.meta is None else case.meta.components.get(ParameterLocation.BODY)
    if body is not None and body.mode == GenerationMode.NEGATIVE and response.status_code < 300:
        yield f"{response.status_code} for a body that the document does not allow"


def _drawn(strategy: SearchStrategy[Case], number: int) -> list[Case]:
    found: list[Case] = []

    @seed(number)
    @settings(
        max_examples=CASES_AT_ONCE,
        database=None,
        deadline=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(case=strategy)
    def draw(case: Case) -> None:
        found.append(case)

    draw()
    return found


def _point_at_what_is_there(
    case: Case, tokens: Mapping[str, str], known: Mapping[str, str], chance: random.Random
) -> None:
    case.headers.pop("Authorization", None)
    token = chance.choice([*tokens.values(), None])
    if token is not None:
        case.headers["Authorization"] = f"Bearer {token}"
    if chance.random() < KNOWN_SHARE:
        for name in set(known) & set(case.path_parameters):
            case.path_parameters[name] = known[name]
