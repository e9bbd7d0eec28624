"""Scheduled gains over HTTP: submitted by condition, judged each at its point, installed set by set."""

from __future__ import annotations

from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body, without
from tests.api.test_openapi import answer_schema, problems


def with_gain(value: float) -> Body:
    return plant.CONTROLLER | {"proportional": {"value": value, "unit": "gain"}}


def test_scheduled_gains_are_installed_in_one_record_or_set_by_set(service: Service, loop_id: str) -> None:
    high_load = plant.MODEL | {"operating_point": "high load"}
    assert service.post(f"/v1/loops/{loop_id}/models", high_load).status_code == 201
    sets = [
        {"condition": condition, "operating_points": [point], "controller": with_gain(gain)}
        for condition, point, gain in (("one pump", "normal load", 2.0), ("two pumps", "high load", 1.5))
    ]
    submitted = without(plant.SUBMISSION, "controller") | {"gain_sets": sets}
    submission = service.post("/v1/submissions", submitted).json
    assert [each["model"]["operating_point"] for each in submission["recomputations"]] == [
        "normal load",
        "high load",
    ]
    path = f"/v1/submissions/{submission['id']}"
    approval = {
        "decision": "approve",
        "reason": "Both sets read against the limits.",
        "content_digest": submission["content_digest"],
        "password": password_of("reviewer"),
    }
    assert service.post(f"{path}/decisions", approval, "reviewer").status_code == 201

    done = without(without(plant.installed_now(), "as_found"), "as_left")
    one = {"condition": "one pump", "as_found": with_gain(1.0), "as_left": with_gain(2.0)}
    two = {"condition": "two pumps", "as_found": with_gain(1.0), "as_left": with_gain(15.0)}
    mistyped = service.post(f"{path}/installations", done | {"gain_sets": [one, two]})
    assert mistyped.status_code == 201, mistyped.text
    assert mistyped.json["gain_sets"] == [
        {"gain_set": 0, "as_approved": True},
        {"gain_set": 1, "as_approved": False},
    ]
    assert {each["condition"] for each in mistyped.json["differences"]} == {"two pumps"}
    recomputed = mistyped.json["as_left_recomputed"]["recomputations"]
    assert [(each["gain_set"], each["model"]["operating_point"]) for each in recomputed] == [(1, "high load")]
    assert service.get(path).json["state"] == "approved"
    mended = two | {"as_found": with_gain(15.0), "as_left": with_gain(1.5)}
    answer = service.post(f"{path}/installations", done | {"gain_sets": [mended]})
    assert answer.json["as_approved"]
    assert service.get(path).json["state"] == "in_force"
    description = service.get("/v1/openapi.json", person=None).json
    schema = answer_schema(description, "/v1/submissions/{submission_id}/installations", "post", "201")
    assert problems(description, schema, answer.json) == []

    for wrong in (
        done | {"gain_sets": [one | {"condition": "three pumps"}]},
        done | {"gain_sets": []},
        done | {"gain_sets": [without(one, "as_left")]},
        done | {"gain_sets": [one], "as_left": with_gain(2.0)},
        plant.installed_now() | {"as_left": with_gain(9.0)},
        done,
    ):
        assert service.post(f"{path}/installations", wrong).status_code == 422
