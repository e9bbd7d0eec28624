"""Limits: published by name, and each enforced where it is published, before any work is done."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

from service.analysis.errors import FieldError
from service.documents import recomputations
from service.records import recomputing
from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body
from tests.api.test_openapi import answer_schema, problems

Sized = Callable[[int], tuple[str, Any]]
"""An address, and the body that has so much of one thing."""


def _recomputed(**changes: Any) -> tuple[str, Body]:
    return "/v1/recomputations", plant.RECOMPUTATION | changes


def _plant(**model: Any) -> tuple[str, Body]:
    return _recomputed(plant_model={"dead_time_s": 1.0} | model)


def _submitted(**changes: Any) -> tuple[str, Body]:
    return "/v1/submissions", plant.SUBMISSION | changes


def _sets(number: int, points: int) -> tuple[str, Body]:
    one = {"operating_points": ["normal load"] * points, "controller": plant.CONTROLLER}
    body = {name: value for name, value in plant.SUBMISSION.items() if name != "controller"}
    return "/v1/submissions", body | {"gain_sets": [one | {"condition": f"set {n}"} for n in range(number)]}


def _nested(depth: int) -> Any:
    return {"site": _nested(depth - 1)} if depth > 1 else {"site": "x"}


def _count(value: Any) -> int:
    """Count the values of a document, objects and arrays among them."""
    inner = value.values() if isinstance(value, dict) else value if isinstance(value, list) else ()
    return 1 + sum(map(_count, inner))


def _values(number: int) -> list[Any]:
    """Arrays of so many values in all, themselves included."""
    whole, rest = divmod(number, 5000)
    return [[0] * 4999] * whole + ([[0] * (rest - 1)] if rest else [])


def _deviations(number: int) -> tuple[str, Body]:
    given = [{"criterion": f"limit {n}", "reason": "accepted"} for n in range(number)]
    digest, password = "0" * 64, password_of("reviewer")
    decision = {"decision": "approve", "reason": "read", "content_digest": digest, "password": password}
    return "decisions", decision | {"deviation": given}


SIZED: dict[str, Sized] = {
    "depth_max": lambda n: ("/v1/loops", _nested(n)),
    "object_keys_max": lambda n: ("/v1/loops", {f"key {k}": 1 for k in range(n)}),
    "array_items_max": lambda n: _recomputed(include=[0] * n),
    "values_max": lambda n: _recomputed(include=_values(n - _count(plant.RECOMPUTATION) - 1)),
    "number_characters_max": lambda n: _recomputed(settling_band_percent=int("9" * n)),
    "reason_characters_max": lambda n: _submitted(reason="x" * n),
    "line_characters_max": lambda n: ("/v1/loops", plant.LOOP | {"description": "x" * n}),
    "tag_characters_max": lambda n: ("/v1/loops", plant.LOOP | {"tag": "T" * n}),
    "gain_sets_max": lambda n: _sets(n, 1),
    "operating_points_max": lambda n: _sets(1, n),
    "prepared_by_max": lambda n: _submitted(prepared_by=["submitter"] * n),
    "deviations_max": _deviations,
    "areas_max": lambda n: ("access", {"roles": ["reviewer"], "areas": ["x"] * n, "reason": "moved"}),
    "recorded_settings_max": lambda n: _recomputed(
        controller=plant.CONTROLLER
        | {"recorded_settings": [{"name": f"{k}", "value": 1, "unit": ""} for k in range(n)]}
    ),
    "plant_order_max": lambda n: _plant(
        kind="zeros_poles_gain", zeros_rad_s=[], poles_rad_s=[-1.0 - k for k in range(n)], gain=1.0
    ),
    "frequency_points_max": lambda n: _plant(
        kind="frequency_response",
        frequencies_rad_s=[0.001 * (k + 1) for k in range(n)],
        response=[0.5] * n,
        unstable_poles=0,
        dead_time_s=0.0,
    ),
}
LARGE = {"body_bytes_max", "page_items_max", "idempotency_key_characters_max", "settling_band_percent_max"}
SMALL = {"settling_band_percent_min", "password_characters_min"}
ELSEWHERE = {"page_items_default", "password_characters_max", *LARGE, *SMALL}
"""Tried one by one below, in the tests of accounts, or no limit at all."""


PUBLISHED = {
    "body_bytes_max": 1_000_000,
    "depth_max": 16,
    "object_keys_max": 100,
    "array_items_max": 10_000,
    "values_max": 50_000,
    "number_characters_max": 400,
    "reason_characters_max": 4000,
    "line_characters_max": 200,
    "tag_characters_max": 60,
    "password_characters_min": 15,
    "password_characters_max": 128,
    "gain_sets_max": 20,
    "operating_points_max": 20,
    "prepared_by_max": 20,
    "deviations_max": 60,
    "areas_max": 100,
    "recorded_settings_max": 40,
    "plant_order_max": 20,
    "frequency_points_max": 2000,
    "settling_band_percent_min": 0.1,
    "settling_band_percent_max": 20.0,
    "page_items_default": 50,
    "page_items_max": 200,
    "idempotency_key_characters_max": 200,
}
"""The interface: with another number, somebody's document that was taken until now is refused."""


@pytest.fixture
def limits(service: Service) -> dict[str, int]:
    answer = service.get("/v1/limits")
    assert answer.status_code == 200
    published: dict[str, int] = answer.json
    return published


def test_every_limit_is_tried(limits: dict[str, int]) -> None:
    assert set(limits) == set(SIZED) | ELSEWHERE


def test_the_limits_are_those_that_people_rely_on(limits: dict[str, int]) -> None:
    assert limits == PUBLISHED


def test_limits_are_as_described(service: Service, limits: dict[str, int]) -> None:
    description = service.get("/v1/openapi.json", person=None).json
    assert problems(description, answer_schema(description, "/v1/limits"), limits) == []


def _sent(service: Service, submission: Body, sized: tuple[str, Any]) -> Any:
    path, body = sized
    if path == "decisions":
        return service.post(f"/v1/submissions/{submission['id']}/decisions", body, "reviewer")
    if path == "access":
        account = service.get("/v1/accounts/reviewer", "administrator")
        headers = {"If-Match": account.headers["ETag"]}
        return service.call("PUT", "/v1/accounts/reviewer/access", "administrator", body, headers=headers)
    return service.post(path, body)


def test_one_past_a_limit_is_refused_by_name_and_before_any_work(
    service: Service, submission: Body, limits: dict[str, int], monkeypatch: pytest.MonkeyPatch
) -> None:
    def worked(*_arguments: Any, **_named: Any) -> None:
        raise AssertionError("work was done")

    monkeypatch.setattr(recomputations, "recompute", worked)
    monkeypatch.setattr(recomputing, "recompute", worked)
    rows = service.rows()
    for name, sized in SIZED.items():
        answer = _sent(service, submission, sized(limits[name] + 1))
        assert answer.status_code in (400, 413, 422), (name, answer.text)
        said = json.dumps(answer.json)
        assert str(limits[name]) in said or str(limits[name] + 1) in said, (name, said)
    assert service.rows() == rows


def test_at_a_limit_nothing_is_refused_for_its_size(
    service: Service, submission: Body, limits: dict[str, int], monkeypatch: pytest.MonkeyPatch
) -> None:
    def reached(*_arguments: Any, **_named: Any) -> None:
        # the largest plants take a while, and what comes of them is not asked here
        raise FieldError(("controller",), "reached")

    monkeypatch.setattr(recomputations, "recompute", reached)
    monkeypatch.setattr(recomputing, "recompute", reached)
    for name, sized in SIZED.items():
        answer = _sent(service, submission, sized(limits[name]))
        said = json.dumps(answer.json)
        assert f"at most {limits[name]} " not in said, name
        assert f"most {limits[name]} deep" not in said, name


def test_the_size_of_a_body_is_bounded(service: Service, limits: dict[str, int]) -> None:
    body = json.dumps(plant.LOOP).encode()
    padded = body + b" " * (limits["body_bytes_max"] - len(body))
    json_type = {"Content-Type": "application/json"}
    assert service.post("/v1/loops", data=padded + b" ", headers=json_type).status_code == 413
    assert service.post("/v1/loops", data=padded, headers=json_type).status_code == 201


def test_a_page_a_key_and_a_band_are_bounded(service: Service, limits: dict[str, int]) -> None:
    most = limits["page_items_max"]
    assert service.get(f"/v1/loops?limit={most}").status_code == 200
    assert service.get(f"/v1/loops?limit={most + 1}").status_code == 400
    most = limits["idempotency_key_characters_max"]
    for length, status in ((most, 200), (most + 1, 400)):
        headers = {"Idempotency-Key": "k" * length}
        answer = service.post("/v1/recomputations", plant.RECOMPUTATION, headers=headers)
        assert answer.status_code == status
    low, high = limits["settling_band_percent_min"], limits["settling_band_percent_max"]
    for band, status in ((low, 200), (high, 200), (low / 2, 422), (high * 2, 422)):
        body = plant.RECOMPUTATION | {"settling_band_percent": band}
        assert service.post("/v1/recomputations", body).status_code == status
