"""Each refusal: its status, its type, its place, and that nothing of the request is stored."""

from __future__ import annotations

import gzip
import json
from typing import Any

import pytest

from tests.api import plant
from tests.api.conftest import Decide, Service, password_of
from tests.api.plant import Body, changed, without

JSON = {"Content-Type": "application/json"}


def pointers(answer: Any) -> list[str]:
    return [place["pointer"] for place in answer.json["errors"]]


def text_of(body: Body, old: str, new: str) -> bytes:
    text = json.dumps(body)
    assert old in text
    return text.replace(old, new, 1).encode()


def tagged(tag: str) -> bytes:
    return json.dumps(plant.LOOP | {"tag": tag}).encode()


HOSTILE: dict[str, tuple[bytes, int, list[str]]] = {
    "empty": (b"", 400, []),
    "cut off": (b'{"site": "V', 400, []),
    "not UTF-8": (b'{"site": "\xff"}', 400, []),
    "NaN": (text_of(plant.LOOP, "150.0", "NaN"), 400, ["/pv/high"]),
    "past float64": (text_of(plant.LOOP, "150.0", "1e999"), 400, ["/pv/high"]),
    "repeated key": (text_of(plant.LOOP, '"tag"', '"site": "x", "tag"'), 400, ["/site"]),
    "deep": (b"[" * 100_000, 400, []),
    "digits": (text_of(plant.LOOP, "150.0", "1" * 5000), 400, ["/pv/high"]),
    "an array": (b"[]", 422, [""]),
    "a boolean as a number": (text_of(plant.LOOP, "150.0", "true"), 422, ["/pv/high"]),
    "a text as a number": (text_of(plant.LOOP, "150.0", '"150"'), 422, ["/pv/high"]),
    "unknown field": (json.dumps(plant.LOOP | {"state": "approved"}).encode(), 422, ["/state"]),
    "an id of one's own": (json.dumps(plant.LOOP | {"id": "1"}).encode(), 422, ["/id"]),
    "two missing": (json.dumps(without(without(plant.LOOP, "tag"), "pv")).encode(), 422, ["/pv", "/tag"]),
    "range upside down": (json.dumps(changed(plant.LOOP, "/pv/high", -1)).encode(), 422, ["/pv/high"]),
    "direction mark in a tag": (
        json.dumps(changed(plant.LOOP, "/tag", "TIC\u202e204")).encode(),
        422,
        ["/tag"],
    ),
    "zero-width space in a tag": (
        json.dumps(changed(plant.LOOP, "/tag", "TIC\u200b204")).encode(),
        422,
        ["/tag"],
    ),
    "long tag": (json.dumps(changed(plant.LOOP, "/tag", "T" * 100_000)).encode(), 422, ["/tag"]),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_a_hostile_body_is_a_problem_with_its_place_and_nothing_is_stored(
    service: Service, name: str
) -> None:
    body, status, places = HOSTILE[name]
    before = service.rows()
    answer = service.post("/v1/loops", data=body, headers=JSON)
    assert answer.status_code == status, answer.text
    assert answer.mimetype == "application/problem+json"
    assert answer.json["type"] == ("/problems/not-json" if status == 400 else "/problems/invalid-fields")
    assert pointers(answer) == places
    assert service.rows() == before


CONTROLLERS: dict[str, tuple[str, object, str]] = {
    "negative gain": ("/controller/proportional/value", -2.0, "/controller/proportional/value"),
    "integral time of 0": ("/controller/integral/value", 0, "/controller/integral/value"),
    "unit of another form": ("/controller/integral/unit", "gain_per_second", "/controller/integral/unit"),
    "unknown form": ("/controller/form", "best", "/controller/form"),
    "scan of 0": ("/controller/scan", {"interval_s": 0}, "/controller/scan/interval_s"),
    "filter without derivative": (
        "/controller/derivative_filter",
        {"value": 8, "unit": "ratio"},
        "/controller/derivative_filter",
    ),
}


@pytest.mark.parametrize("name", CONTROLLERS)
def test_gains_that_no_controller_has_are_refused_at_their_place(
    service: Service, loop_id: str, name: str
) -> None:
    pointer, value, place = CONTROLLERS[name]
    before = service.rows()
    answer = service.post("/v1/submissions", changed(plant.SUBMISSION, pointer, value))
    assert (answer.status_code, pointers(answer)) == (422, [place])
    assert service.rows() == before


@pytest.mark.parametrize(
    "name", ["action", "derivative", "derivative_filter", "measurement_filter_s", "setpoint_weight", "scan"]
)
def test_a_record_asks_for_every_term_by_name(service: Service, loop_id: str, name: str) -> None:
    body = changed(plant.SUBMISSION, "/controller", without(plant.CONTROLLER, name))
    answer = service.post("/v1/submissions", body)
    assert answer.status_code == 422
    assert f"/controller/{name}" in pointers(answer)


PLANTS: dict[str, tuple[Body, int]] = {
    "order 1000": (
        {"kind": "transfer_function", "numerator": [1], "denominator": [1.0] * 1001},
        422,
    ),
    "zero denominator": ({"kind": "transfer_function", "numerator": [1], "denominator": [0, 0]}, 422),
    "improper": ({"kind": "transfer_function", "numerator": [1, 2, 3], "denominator": [1, 1]}, 422),
    "empty": ({"kind": "transfer_function", "numerator": [], "denominator": [1]}, 422),
    "negative dead time": (plant.MODEL["plant_model"] | {"dead_time_s": -1}, 422),
    "lone complex pole": (
        {"kind": "zeros_poles_gain", "zeros_rad_s": [], "poles_rad_s": [[-1, 2]], "gain": 1},
        422,
    ),
}


@pytest.mark.parametrize("name", PLANTS)
def test_a_plant_that_cannot_be_is_refused_with_a_place(service: Service, loop_id: str, name: str) -> None:
    model, status = PLANTS[name]
    before = service.rows()
    for path, body in (
        (f"/v1/loops/{loop_id}/models", plant.MODEL | {"plant_model": model}),
        ("/v1/recomputations", plant.RECOMPUTATION | {"plant_model": model}),
    ):
        answer = service.post(path, body)
        assert answer.status_code == status, answer.text
        assert all(place.startswith("/plant_model") for place in pointers(answer))
        assert pointers(answer)
    assert service.rows() == before


def test_a_body_of_another_type_is_415(service: Service) -> None:
    body = json.dumps(plant.LOOP).encode()
    for headers in (
        {"Content-Type": "text/plain"},
        {"Content-Type": "application/json; charset=latin-1"},
        JSON | {"Content-Encoding": "gzip"},
        {},
    ):
        answer = service.post("/v1/loops", data=body, headers=headers)
        assert answer.status_code == 415, headers
        assert answer.json["type"] == "/problems/unsupported-media-type"


def test_a_compressed_body_is_not_unpacked(service: Service) -> None:
    bomb = gzip.compress(b" " * 50_000_000)
    answer = service.post("/v1/loops", data=bomb, headers=JSON | {"Content-Encoding": "gzip"})
    assert answer.status_code == 415


def test_a_body_past_the_limit_is_413(service: Service) -> None:
    answer = service.post("/v1/loops", data=b" " * 1_000_001, headers=JSON)
    assert answer.status_code == 413
    assert "1000000" in answer.json["detail"]


def test_a_body_where_none_is_read_is_refused(service: Service) -> None:
    assert service.get("/v1/loops", data=b"{}", headers=JSON).status_code == 400


@pytest.mark.parametrize(
    ("query", "place"),
    [
        ("colour=red", "/colour"),
        ("limit=0", "/limit"),
        ("limit=201", "/limit"),
        ("limit=many", "/limit"),
        ("site=a&site=b", "/site"),
        ("cursor=eyJhIjoxfQ", "/cursor"),
        (f"q={'x' * 300}", "/q"),
    ],
)
def test_a_query_that_is_not_understood_is_400_by_name(service: Service, query: str, place: str) -> None:
    answer = service.get(f"/v1/loops?{query}")
    assert answer.status_code == 400
    assert answer.json["type"] == "/problems/bad-query"
    assert pointers(answer) == [place]


@pytest.mark.parametrize("since", ["2026-03-01", "1772323200", "2026-03-01T08:00:00", "yesterday"])
def test_a_time_in_a_query_has_its_offset(service: Service, since: str) -> None:
    answer = service.get(f"/v1/history?since={since}", person="auditor")
    assert (answer.status_code, pointers(answer)) == (400, ["/since"])


@pytest.mark.parametrize("kind", ["gains_approve", "Gains_approved", "gains approved", "planned"])
def test_a_kind_that_no_entry_has_is_no_search_without_a_result(service: Service, kind: str) -> None:
    answer = service.get(f"/v1/history?kind={kind}", person="auditor")
    assert (answer.status_code, pointers(answer)) == (400, ["/kind"])
    assert "gains_approved" in answer.json["errors"][0]["detail"]


def test_an_unknown_address_and_an_unknown_method_are_problems_too(service: Service) -> None:
    unknown = service.get("/v1/nowhere")
    assert (unknown.status_code, unknown.json["type"]) == (404, "/problems/not-found")
    method = service.call("DELETE", "/v1/loops")
    assert (method.status_code, method.json["type"]) == (405, "/problems/method-not-allowed")
    assert {"GET", "POST"} <= set(method.headers["Allow"].split(", "))


def test_404_comes_before_403_and_403_before_422(service: Service, loop_id: str, submission: Body) -> None:
    nonsense, loop, own = {"colour": "red"}, f"/v1/loops/{loop_id}", f"/v1/submissions/{submission['id']}"
    for method, path, unknown in (
        ("POST", "/v1/loops", None),
        ("PUT", loop, "/v1/loops/unknown"),
        ("POST", f"{loop}/models", "/v1/loops/unknown/models"),
        ("POST", "/v1/submissions", None),
        ("POST", f"{own}/decisions", "/v1/submissions/unknown/decisions"),
        ("POST", f"{own}/installations", "/v1/submissions/unknown/installations"),
    ):
        if unknown:
            assert service.call(method, unknown, "auditor", nonsense).status_code == 404
        assert service.call(method, path, "auditor", nonsense).status_code == 403
        assert service.call(method, path, "both", nonsense).status_code == 422


def test_400_comes_before_404(service: Service) -> None:
    answer = service.post("/v1/loops/unknown/models", data=b"{", headers=JSON)
    assert answer.status_code == 400


def test_every_problem_names_itself_and_its_request(service: Service) -> None:
    answer = service.get("/v1/loops/unknown")
    assert set(answer.json) == {"type", "title", "status", "detail", "instance", "errors"}
    assert answer.json["instance"] == f"urn:uuid:{answer.headers['X-Request-Id']}"
    assert answer.headers["Cache-Control"] == "no-store"
    page = service.get(answer.json["type"], person=None)
    assert page.status_code == 200
    assert answer.json["title"] in page.text


@pytest.mark.parametrize("password", ["", "wrong battery of reviewer", password_of("submitter")])
def test_a_wrong_password_signs_nothing_and_leaves_a_trace(
    service: Service, decide: Decide, submission: Body, password: str
) -> None:
    before = service.rows()
    answer = decide(password=password)
    if password:
        assert (answer.status_code, answer.json["type"]) == (403, "/problems/signing-refused")
        assert service.rows()["history_events"] == before["history_events"] + 1
    else:
        assert (answer.status_code, pointers(answer)) == (422, ["/password"])
    assert password not in answer.text or not password
    assert service.get(f"/v1/submissions/{submission['id']}").json["state"] == "awaiting_review"


def test_nobody_approves_their_own_and_the_attempt_is_kept(service: Service, loop_id: str) -> None:
    made = service.post("/v1/submissions", plant.SUBMISSION, person="both").json
    body = {
        "decision": "approve",
        "reason": "It is mine.",
        "content_digest": made["content_digest"],
        "password": password_of("both"),
    }
    before = service.rows()
    answer = service.post(f"/v1/submissions/{made['id']}/decisions", body, person="both")
    assert (answer.status_code, answer.json["type"]) == (403, "/problems/forbidden")
    assert service.rows()["history_events"] == before["history_events"] + 1
    assert service.get(f"/v1/submissions/{made['id']}").json["state"] == "awaiting_review"


def test_a_decision_on_other_content_is_412(decide: Decide) -> None:
    answer = decide(content_digest="0" * 64)
    assert (answer.status_code, answer.json["type"]) == (412, "/problems/precondition-failed")


def test_a_second_decision_is_409(decide: Decide) -> None:
    assert decide("reject").status_code == 201
    answer = decide("approve", "second_reviewer")
    assert (answer.status_code, answer.json["type"]) == (409, "/problems/conflict")


def test_what_lies_outside_an_accounts_areas_does_not_exist_for_it(
    service: Service, loop_id: str, submission: Body
) -> None:
    paths = [
        f"/v1/loops/{loop_id}",
        f"/v1/loops/{loop_id}/models",
        f"/v1/loops/{loop_id}/gains-in-force",
        f"/v1/submissions/{submission['id']}",
        f"/v1/submissions/{submission['id']}/content",
        f"/v1/submissions/{submission['id']}/curves",
        f"/v1/submissions/{submission['id']}/sheet.pdf",
    ]
    assert {service.get(path, person="elsewhere").status_code for path in paths} == {404}
    assert {service.get(path, person="auditor").status_code for path in paths} == {200}
    for path in ("decisions", "installations"):
        answer = service.post(f"/v1/submissions/{submission['id']}/{path}", {}, person="elsewhere")
        assert answer.status_code == 404
    assert service.get("/v1/loops", person="elsewhere").json["items"] == []
    assert service.get("/v1/submissions", person="elsewhere").json["items"] == []
    tags = {event["tag"] for event in service.get("/v1/history", person="elsewhere").json["items"]}
    assert plant.LOOP["tag"] not in tags


@pytest.mark.parametrize(
    ("path", "status"),
    [
        ("/v1//loops", 404),
        ("/v1/loops/", 404),
        ("/v1/loops/%00", 404),
        ("/v1/loops/%ff", 404),
        ("/v1/loops/..%2f..", 404),
        (f"/v1/loops/{'x' * 5000}", 404),
        (f"/v1/history/{10**30}", 404),
        ("/v1/history/-1", 404),
        ("/v1/history/1.0", 404),
        ("/v1/loops?site=%00", 400),
        ("/v1/loops?q=%ff", 200),
        ("/v1/loops?q=%25", 200),
        ("/v1/history?since=0001-01-01T00:00:00%2B14:00", 400),
        ("/v1/history?until=9999-12-31T23:59:59-14:00", 400),
        ("/v1/history?since=2026-13-01T00:00:00Z", 400),
        (f"/v1/history?limit={'9' * 5000}", 400),
    ],
)
def test_an_address_that_nobody_means_is_refused_calmly(service: Service, path: str, status: int) -> None:
    answer = service.get(path, person="auditor")
    assert answer.status_code == status
    assert "Location" not in answer.headers


@pytest.mark.parametrize("method", ["OPTIONS", "TRACE", "PATCH", "DELETE", "BREW"])
def test_other_methods_are_not_taken(service: Service, method: str) -> None:
    assert service.call(method, "/v1/loops").status_code == 405


def test_a_percent_sign_in_a_search_is_a_percent_sign(service: Service, loop_id: str) -> None:
    assert service.get("/v1/loops?q=%25").json["items"] == []
    assert service.get("/v1/loops?q=_").json["items"] == []
    assert len(service.get("/v1/loops?q=wash").json["items"]) == 1


@pytest.mark.parametrize(
    "time",
    [
        "0001-01-01T00:00:00+14:00",
        "9999-12-31T23:59:59-14:00",
        "2026-03-01",
        "2026-03-01T00:00:00",
        "1772323200",
        1772323200,
        "",
        "9" * 400,
    ],
)
@pytest.mark.parametrize("name", ["temporary_until", "install_by"])
def test_a_time_in_a_body_is_one_with_its_offset(
    service: Service, loop_id: str, name: str, time: object
) -> None:
    answer = service.post("/v1/submissions", plant.SUBMISSION | {name: time})
    assert (answer.status_code, pointers(answer)) == (422, [f"/{name}"])


def test_a_body_with_thousands_of_faults_gets_a_short_answer(service: Service) -> None:
    body = changed(plant.MODEL, "/plant_model", {"kind": "transfer_function", "denominator": [1.0]})
    body["plant_model"]["numerator"] = ["x"] * 5000
    answer = service.post("/v1/recomputations", {"plant_model": body["plant_model"], "controller": {}})
    assert answer.status_code == 422
    assert len(answer.json["errors"]) == 100
    assert len(answer.data) < 20_000
