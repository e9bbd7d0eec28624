"""A request that is accepted, and the same with one place changed."""

from __future__ import annotations

import json
from enum import Enum
from typing import Any

import pytest

from service.documents.errors import DocumentError, FieldProblem, InvalidDocument
from service.documents.reading import read
from service.documents.recomputations import RecomputationRequest

REQUEST: dict[str, Any] = {
    "plant_model": {"kind": "first_order", "gain": 1.2, "time_constant_s": 30.0, "dead_time_s": 5.0},
    "controller": {
        "form": "ideal",
        "action": "reverse",
        "proportional": {"value": 2.0, "unit": "gain"},
        "integral": {"value": 40.0, "unit": "seconds"},
        "derivative": {"value": 1.5, "unit": "seconds"},
        "derivative_filter": {"value": 10.0, "unit": "ratio"},
        "measurement_filter_s": 0.5,
        "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
        "scan": None,
    },
}


class Absent(Enum):
    """Stands for taking a field away."""

    ABSENT = "absent"


ABSENT = Absent.ABSENT


def changed(pointer: str, value: object, request: dict[str, Any] | None = None) -> dict[str, Any]:
    """The request with another value at one place."""
    # by way of JSON, so that what stands twice is two objects afterwards
    document: dict[str, Any] = json.loads(json.dumps(REQUEST if request is None else request))
    *above, name = pointer.lstrip("/").split("/")
    place: Any = document
    for step in above:
        place = place[int(step)] if isinstance(place, list) else place[step]
    if value is ABSENT:
        del place[name]
    else:
        place[name] = value
    return document


def as_bytes(document: object) -> bytes:
    return json.dumps(document).encode()


def accepted(document: object) -> RecomputationRequest:
    return read(RecomputationRequest, as_bytes(document))


def refusals(document: object, kind: type[DocumentError] = InvalidDocument) -> tuple[FieldProblem, ...]:
    """What is wrong with a request, place by place."""
    with pytest.raises(kind) as caught:
        read(RecomputationRequest, document if isinstance(document, bytes) else as_bytes(document))
    return caught.value.errors


def refused_at(document: object, kind: type[DocumentError] = InvalidDocument) -> list[str]:
    """The places of what is wrong with a request."""
    return [problem.pointer for problem in refusals(document, kind)]
