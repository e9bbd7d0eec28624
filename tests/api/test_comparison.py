"""Two submissions, or one and the gains in force, held against each other over HTTP, term by term."""

from __future__ import annotations

from tests.api import plant
from tests.api.conftest import Service
from tests.api.plant import Body
from tests.api.test_openapi import answer_schema, problems

IN_PARALLEL: Body = plant.CONTROLLER | {
    "form": "parallel",
    "proportional": {"value": 2.0, "unit": "gain"},
    "integral": {"value": 0.1, "unit": "gain_per_second"},
}


def changed(answer: Body) -> list[tuple[str, object, object]]:
    (found,) = answer["gain_sets"]
    settings = found["comparison"]["settings"]
    return [(each["setting"], each["before"], each["after"]) for each in settings if each["changed"]]


def test_two_forms_are_compared_in_a_common_one(service: Service, submission: Body) -> None:
    other = service.post("/v1/submissions", plant.SUBMISSION | {"controller": IN_PARALLEL}).json
    answer = service.get(f"/v1/submissions/{other['id']}/comparison?before={submission['id']}")
    assert answer.status_code == 200, answer.text
    assert answer.json["gain_sets"][0]["comparison"]["common_form"] == "parallel"
    # Ki = Kc/Ti = 2/30 in the common form
    assert changed(answer.json) == [("integral", 2.0 / 30.0, 0.1)]
    description = service.get("/v1/openapi.json", person=None).json
    schema = answer_schema(description, "/v1/submissions/{submission_id}/comparison")
    assert problems(description, schema, answer.json) == []


def test_without_another_the_gains_in_force_now_come_before(service: Service, submission: Body) -> None:
    path = f"/v1/submissions/{submission['id']}/comparison"
    assert service.get(path).json["before"] is None
    found = plant.CONTROLLER | {"proportional": {"value": 1.6, "unit": "gain", "displayed": "1.60"}}
    running = service.post("/v1/submissions", plant.SUBMISSION | {"kind": "baseline", "controller": found})
    answer = service.get(path).json
    assert answer["before"]["submission_id"] == running.json["id"]
    assert changed(answer) == [("proportional", 1.6, 2.0)]


def test_what_cannot_be_compared_is_refused(service: Service, submission: Body) -> None:
    path = f"/v1/submissions/{submission['id']}/comparison"
    assert service.get(f"{path}?before=unknown").status_code == 404
    assert service.get(path, person="elsewhere").status_code == 404
    assert service.get(f"{path}?with=unknown").status_code == 400
    service.post("/v1/loops", plant.LOOP | {"tag": "TIC-205"})
    other_loop = {"loop": {"site": "Vanholm", "tag": "TIC-205"}}
    other = service.post("/v1/submissions", plant.SUBMISSION | other_loop).json
    assert service.get(f"{path}?before={other['id']}").status_code == 409


def test_what_the_change_does_stands_in_sentences(service: Service, submission: Body) -> None:
    assert submission["effects"] == []
    found = plant.CONTROLLER | {"proportional": {"value": 1.2, "unit": "gain", "displayed": "1.20"}}
    service.post("/v1/submissions", plant.SUBMISSION | {"kind": "baseline", "controller": found})
    (effect,) = service.post("/v1/submissions", plant.SUBMISSION).json["effects"]
    assert any("nearer to instability" in sentence for sentence in effect["sentences"])
