"""Changes of what approvals rest on, over HTTP: refused to one person, confirmed by another."""

from __future__ import annotations

import hashlib
from typing import Any

import pytest
from werkzeug.test import TestResponse

from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body
from tests.api.test_openapi import answer_schema, problems

WIDER: Body = plant.LOOP | {"pv": {"low": 0.0, "high": 200.0, "unit": "°C"}}
PROPOSAL: Body = {"revision": 1, "reason": "The transmitter was ranged anew.", "loop": WIDER}


@pytest.fixture
def change(service: Service, loop_id: str) -> Body:
    made = service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL)
    assert made.status_code == 201, made.text
    body: Body = made.json
    return body


def decide(
    service: Service, change: Body, decision: str = "confirm", person: str = "reviewer", **changes: Any
) -> TestResponse:
    body = {
        "decision": decision,
        "reason": "Read against the data sheet.",
        "content_digest": change["content_digest"],
        "password": password_of(person),
    }
    headers = changes.pop("headers", {})
    return service.post(f"/v1/changes/{change['id']}/decisions", body | changes, person, headers=headers)


def test_a_change_by_one_person_is_refused_with_each_place(service: Service, loop_id: str) -> None:
    changed = WIDER | {"fail_position": "open"}
    headers = {"If-Match": '"revision-1"'}
    rows = service.rows()
    answer = service.call("PUT", f"/v1/loops/{loop_id}", json=changed | plant.WHY, headers=headers)
    assert (answer.status_code, answer.json["type"]) == (409, "/problems/second-person-needed")
    assert [error["pointer"] for error in answer.json["errors"]] == ["/pv", "/fail_position"]
    assert service.rows() == rows
    assert service.get("/problems/second-person-needed", person=None).status_code == 200


def test_412_comes_before_the_second_person(service: Service, loop_id: str) -> None:
    headers = {"If-Match": '"revision-9"'}
    answer = service.call("PUT", f"/v1/loops/{loop_id}", json=WIDER | plant.WHY, headers=headers)
    assert answer.status_code == 412


def test_a_confirmed_change_is_the_loop(service: Service, loop_id: str, change: Body) -> None:
    assert (change["state"], change["open_decisions"]) == ("awaiting_confirmation", ["withdraw"])
    answer = decide(service, change)
    assert answer.status_code == 201, answer.text
    assert answer.json["state"] == "confirmed"
    assert answer.headers["Location"] == f"/v1/changes/{change['id']}"
    assert service.get(f"/v1/loops/{loop_id}").json["pv"]["high"] == 200.0


def test_the_digest_is_of_the_bytes_that_are_given_out(service: Service, change: Body) -> None:
    content = service.get(f"/v1/changes/{change['id']}/content")
    assert hashlib.sha256(content.data).hexdigest() == change["content_digest"]


def test_what_awaits_review_is_recomputed_and_the_old_digest_signs_nothing(
    service: Service, submission: Body
) -> None:
    change = service.post(f"/v1/loops/{submission['loop_id']}/changes", PROPOSAL).json
    assert decide(service, change).status_code == 201
    path = f"/v1/submissions/{submission['id']}"
    again = service.get(path).json
    assert again["content_digest"] != submission["content_digest"]
    assert again["recomputed_again"]["change_id"] == change["id"]
    assert (again["loop_revision"], again["loop"]["pv"]["high"]) == (2, 200.0)
    approval = {
        "decision": "approve",
        "reason": "Margins read against the limits.",
        "content_digest": submission["content_digest"],
        "password": password_of("reviewer"),
    }
    assert service.post(f"{path}/decisions", approval, "reviewer").status_code == 412
    fresh = approval | {"content_digest": again["content_digest"]}
    assert service.post(f"{path}/decisions", fresh, "reviewer").status_code == 201


def test_gains_in_force_are_due_for_a_recheck(service: Service, loop_id: str) -> None:
    found = service.post("/v1/submissions", plant.SUBMISSION | {"kind": "baseline"}).json
    change = service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL).json
    assert service.get("/v1/submissions?recheck_due=true").json["items"] == []
    decide(service, change)
    (marked,) = service.get("/v1/submissions?recheck_due=true").json["items"]
    assert (marked["id"], marked["recheck_due"]) == (found["id"], True)
    running = service.get(f"/v1/loops/{loop_id}/gains-in-force").json["gains_in_force"]
    assert running["recheck_due"]["change_id"] == change["id"]
    assert service.get("/v1/submissions?recheck_due=perhaps").status_code == 400


def test_an_operating_point_is_retired_by_two(service: Service, loop_id: str) -> None:
    retirement = {"revision": 1, "reason": "The line is gone.", "retire_operating_point": "normal load"}
    change = service.post(f"/v1/loops/{loop_id}/changes", retirement).json
    assert change["retires"]["model"]["operating_point"] == "normal load"
    assert decide(service, change).status_code == 201
    models = service.get(f"/v1/loops/{loop_id}/models").json["items"]
    assert [(model["in_force"], model["retired"]) for model in models] == [(False, True), (False, False)]


def test_nobody_confirms_their_own_change_and_the_attempt_is_told(service: Service, loop_id: str) -> None:
    change = service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL, "both").json
    assert decide(service, change, person="both").status_code == 403
    last = service.get("/v1/history?kind=signing_refused", person="auditor").json["items"][-1]
    assert last["content"]["change_id"] == change["id"]


def test_a_wrong_password_signs_nothing(service: Service, change: Body) -> None:
    answer = decide(service, change, password=password_of("auditor"))
    assert (answer.status_code, answer.json["type"]) == (403, "/problems/signing-refused")
    assert service.get(f"/v1/changes/{change['id']}").json["state"] == "awaiting_confirmation"


def test_another_digest_is_412_and_a_loop_that_moved_is_409(
    service: Service, loop_id: str, change: Body
) -> None:
    assert decide(service, change, content_digest="0" * 64).status_code == 412
    headers = {"If-Match": '"revision-1"'}
    other = plant.LOOP | {"description": "Wash water"}
    assert (
        service.call("PUT", f"/v1/loops/{loop_id}", json=other | plant.WHY, headers=headers).status_code
        == 200
    )
    assert decide(service, change).status_code == 409
    assert service.get(f"/v1/changes/{change['id']}").json["state"] == "overtaken"


def test_a_proposal_from_another_revision_is_412(service: Service, loop_id: str) -> None:
    answer = service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL | {"revision": 3})
    assert answer.status_code == 412
    paths = service.get("/v1/openapi.json", person=None).json["paths"]
    assert "412" in paths["/v1/loops/{loop_id}/changes"]["post"]["responses"]


@pytest.mark.parametrize(
    "body",
    [
        PROPOSAL | {"retire_operating_point": "normal load"},
        {"revision": 1, "reason": "None of the two."},
        PROPOSAL | {"reason": " "},
        PROPOSAL | {"revision": 0},
        PROPOSAL | {"state": "confirmed"},
        PROPOSAL | {"loop": plant.LOOP},
        PROPOSAL | {"loop": plant.LOOP | {"tag": "TIC-205"}},
    ],
)
def test_a_proposal_that_makes_no_sense_is_422(service: Service, loop_id: str, body: Body) -> None:
    rows = service.rows()
    assert service.post(f"/v1/loops/{loop_id}/changes", body).status_code == 422
    assert service.rows() == rows


def test_a_change_elsewhere_is_not_there(service: Service, loop_id: str, change: Body) -> None:
    for path in (f"/v1/changes/{change['id']}", f"/v1/loops/{loop_id}/changes"):
        assert service.get(path, person="elsewhere").status_code == 404
    assert service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL, "elsewhere").status_code == 404
    assert decide(service, change, person="elsewhere").status_code == 404
    assert service.get("/v1/changes", person="elsewhere").json["items"] == []


def test_a_repeated_confirmation_is_the_first_one(service: Service, change: Body) -> None:
    key = {"Idempotency-Key": "confirm"}
    first = decide(service, change, headers=key)
    rows = service.rows()
    again = decide(service, change, headers=key)
    assert (again.status_code, again.data) == (201, first.data)
    assert service.rows() == rows


def test_changes_are_as_described(service: Service, loop_id: str, change: Body) -> None:
    description = service.get("/v1/openapi.json", person=None).json
    decided = decide(service, change)
    one = answer_schema(description, "/v1/changes/{change_id}/decisions", "post", "201")
    assert problems(description, one, decided.json) == []
    for path, template in (
        ("/v1/changes?state=confirmed&tag=tic-204", "/v1/changes"),
        (f"/v1/loops/{loop_id}/changes", "/v1/loops/{loop_id}/changes"),
        (f"/v1/changes/{change['id']}", "/v1/changes/{change_id}"),
        ("/v1/submissions", "/v1/submissions"),
    ):
        assert problems(description, answer_schema(description, template), service.get(path).json) == []
    assert len(service.get("/v1/changes?state=confirmed").json["items"]) == 1
    assert service.get("/v1/changes?state=rejected").json["items"] == []


def test_the_examples_of_a_change_run(service: Service) -> None:
    description = service.get("/v1/openapi.json", person=None).json
    schemas = description["components"]["schemas"]
    loop = service.post("/v1/loops", schemas["LoopRegistration"]["examples"][0]).json
    proposal = schemas["LoopChangeRequest"]["examples"][0]
    change = service.post(f"/v1/loops/{loop['id']}/changes", proposal)
    assert change.status_code == 201, change.text
    own = {"content_digest": change.json["content_digest"], "password": password_of("reviewer")}
    decision = schemas["ChangeDecisionRequest"]["examples"][0] | own
    answer = service.post(f"/v1/changes/{change.json['id']}/decisions", decision, "reviewer")
    assert answer.status_code == 201, answer.text
