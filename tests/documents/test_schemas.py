"""The published schemas say what the reader does."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any

import jsonschema_rs
import pytest

from service.documents.changes import LoopChangeRequest
from service.documents.errors import InvalidDocument
from service.documents.examples import EXAMPLES
from service.documents.installations import InstallationRequest
from service.documents.reading import read
from service.documents.recomputations import RecomputationAnswer, RecomputationRequest, answer
from service.documents.schemas import json_schemas
from service.documents.submissions import SubmissionRequest
from service.documents.writing import to_bytes
from tests.documents.requests import ABSENT, as_bytes, changed

READS = tuple(EXAMPLES)
SCHEMAS = json_schemas(READS, (RecomputationAnswer,), "#/$defs/{model}")


def validator(schema: dict[str, Any]) -> jsonschema_rs.Validator:
    return jsonschema_rs.Draft202012Validator({**schema, "$defs": SCHEMAS.definitions})


def reads(document_type: type, document: dict[str, Any]) -> bool:
    try:
        return bool(read(document_type, as_bytes(document)))
    except InvalidDocument:
        return False


@pytest.mark.parametrize("document_type", READS, ids=lambda told: told.__name__)
def test_the_example_is_read(document_type: type) -> None:
    assert reads(document_type, EXAMPLES[document_type])


@pytest.mark.parametrize("document_type", READS, ids=lambda told: told.__name__)
def test_the_example_fits_its_schema(document_type: type) -> None:
    validator(SCHEMAS.of_read[document_type]).validate(EXAMPLES[document_type])


def changes(example: dict[str, Any]) -> Iterator[tuple[str, object]]:
    """Places of a document with what is put there: every field taken away or spoilt, unknown ones added."""
    yield "/unknown_field", 1
    for name, part in example.items():
        yield f"/{name}", ABSENT
        yield f"/{name}", [3]
        if isinstance(part, dict):
            yield f"/{name}/unknown_field", 1
            yield from ((f"/{name}/{inner}", ABSENT) for inner in part)


JOINT_RULES = [
    (SubmissionRequest, "/controller", ABSENT),
    (LoopChangeRequest, "/loop", ABSENT),
    (InstallationRequest, "/as_found", ABSENT),
    (InstallationRequest, "/as_left", ABSENT),
]
"""One field or another in its place: what joins several fields is said by the reader alone."""

CHANGES = [
    (document_type, pointer, value)
    for document_type in READS
    for pointer, value in changes(EXAMPLES[document_type])
    if (document_type, pointer, value) not in JOINT_RULES
]


@pytest.mark.parametrize(("document_type", "pointer", "value"), CHANGES, ids=str)
def test_schema_and_reader_accept_and_refuse_the_same(
    document_type: type, pointer: str, value: object
) -> None:
    document = changed(pointer, value, EXAMPLES[document_type])
    assert validator(SCHEMAS.of_read[document_type]).is_valid(document) == reads(document_type, document)


@pytest.mark.parametrize("value", [-1, 0, "2", True, None])
def test_a_gain_of_the_schema_is_a_gain_of_the_reader(value: object) -> None:
    document = changed("/plant_model/dead_time_s", value, EXAMPLES[RecomputationRequest])
    schema = validator(SCHEMAS.of_read[RecomputationRequest])
    assert schema.is_valid(document) == reads(RecomputationRequest, document)


@pytest.mark.parametrize("include", [[], ["curves"]])
@pytest.mark.parametrize("action", ["reverse", "direct"])
def test_an_answer_fits_its_schema(include: list[str], action: str) -> None:
    document = changed("/controller/action", action, EXAMPLES[RecomputationRequest]) | {"include": include}
    answered = json.loads(to_bytes(answer(read(RecomputationRequest, as_bytes(document)))))
    validator(SCHEMAS.of_written[RecomputationAnswer]).validate(answered)


def test_every_example_stands_in_its_schema() -> None:
    shown = [schema["examples"] for schema in SCHEMAS.definitions.values() if "examples" in schema]
    assert len(shown) + sum("examples" in schema for schema in SCHEMAS.of_read.values()) == len(EXAMPLES)
