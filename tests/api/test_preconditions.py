"""Keys and tags: a request counted once, a change made by who has seen what it changes."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import pytest
from werkzeug.test import TestResponse

from tests.api import plant
from tests.api.conftest import Decide, Service, password_of
from tests.api.plant import Body


def key(text: str) -> dict[str, str]:
    return {"Idempotency-Key": text}


def test_a_loop_is_changed_by_who_names_the_revision_they_saw(service: Service, loop_id: str) -> None:
    path = f"/v1/loops/{loop_id}"
    seen = service.get(path)
    other = plant.LOOP | {"description": "Wash water temperature, second line"}
    changed = service.call("PUT", path, json=other | plant.WHY, headers={"If-Match": seen.headers["ETag"]})
    assert changed.status_code == 200, changed.text
    assert changed.json["revision"] == seen.json["revision"] + 1
    assert changed.headers["ETag"] != seen.headers["ETag"]
    revisions = service.get(f"{path}/revisions").json["items"]
    assert [loop["description"] for loop in revisions] == [other["description"], plant.LOOP["description"]]


@pytest.mark.parametrize(
    ("match", "status"), [(None, 428), ("*", 428), ('"revision-99"', 412), ('W/"revision-1"', 412)]
)
def test_a_change_without_the_present_tag_is_refused(
    service: Service, loop_id: str, match: str | None, status: int
) -> None:
    before = service.rows()
    headers = {"If-Match": match} if match else {}
    answer = service.call("PUT", f"/v1/loops/{loop_id}", json=plant.LOOP | plant.WHY, headers=headers)
    assert answer.status_code == status
    assert service.rows() == before


def test_422_comes_before_412(service: Service, loop_id: str) -> None:
    answer = service.call("PUT", f"/v1/loops/{loop_id}", json={}, headers={"If-Match": '"revision-99"'})
    assert answer.status_code == 422


def test_the_same_key_and_body_give_the_first_answer_and_one_record(service: Service, loop_id: str) -> None:
    first = service.post("/v1/submissions", plant.SUBMISSION, headers=key("one"))
    rows = service.rows()
    again = service.post("/v1/submissions", plant.SUBMISSION, headers=key("one"))
    assert (again.status_code, again.data) == (201, first.data)
    assert again.headers["Location"] == first.headers["Location"]
    assert service.rows() == rows


def test_the_same_key_with_another_body_or_address_is_422(service: Service, loop_id: str) -> None:
    service.post("/v1/loops", plant.LOOP | {"tag": "TIC-301"}, headers=key("one"))
    rows = service.rows()
    other = service.post("/v1/loops", plant.LOOP | {"tag": "TIC-302"}, headers=key("one"))
    elsewhere = service.post(f"/v1/loops/{loop_id}/models", plant.MODEL, headers=key("one"))
    for answer in (other, elsewhere):
        assert (answer.status_code, answer.json["type"]) == (422, "/problems/idempotency-key-reused")
    assert service.rows() == rows


def test_a_key_belongs_to_the_account_that_sent_it(service: Service, loop_id: str) -> None:
    mine = service.post("/v1/submissions", plant.SUBMISSION, headers=key("one")).json
    theirs = service.post("/v1/submissions", plant.SUBMISSION, person="both", headers=key("one")).json
    assert mine["id"] != theirs["id"]


def test_a_refusal_uses_no_key_up(service: Service) -> None:
    assert service.post("/v1/loops", {}, headers=key("one")).status_code == 422
    assert service.post("/v1/loops", plant.LOOP, headers=key("one")).status_code == 201


@pytest.mark.parametrize("text", ["", "x" * 201, "a b", "ü"])
def test_a_key_that_is_none_is_400(service: Service, text: str) -> None:
    answer = service.post("/v1/loops", plant.LOOP, headers=key(text))
    assert (answer.status_code, answer.json["type"]) == (400, "/problems/bad-request")


def test_a_repeated_decision_asks_for_the_password_again(
    service: Service, submission: Body, decide: Decide
) -> None:
    first = decide(headers=key("sign"))
    assert first.status_code == 201
    assert decide(headers=key("sign")).data == first.data
    wrong = decide(headers=key("sign"), password=password_of("submitter"))
    assert (wrong.status_code, wrong.json["type"]) == (403, "/problems/signing-refused")
    assert len(service.get(f"/v1/submissions/{submission['id']}").json["decisions"]) == 1


def test_a_recomputation_under_a_key_is_answered_the_same(service: Service) -> None:
    first = service.post("/v1/recomputations", plant.RECOMPUTATION, headers=key("one"))
    again = service.post("/v1/recomputations", plant.RECOMPUTATION, headers=key("one"))
    assert (first.status_code, again.data) == (200, first.data)
    other = plant.RECOMPUTATION | {"settling_band_percent": 5.0}
    assert service.post("/v1/recomputations", other, headers=key("one")).status_code == 422


def test_of_two_reviewers_who_decide_at_once_one_wins(decide: Decide) -> None:
    with ThreadPoolExecutor(2) as pool:
        first = pool.submit(decide, "reject", "reviewer")
        second = pool.submit(decide, "approve", "second_reviewer")
        statuses = sorted((first.result().status_code, second.result().status_code))
    assert statuses == [201, 409]


def test_of_many_who_send_one_key_at_once_one_makes_the_record(service: Service, loop_id: str) -> None:
    def send(_number: int) -> TestResponse:
        return service.post("/v1/submissions", plant.SUBMISSION, headers=key("one"))

    with ThreadPoolExecutor(4) as pool:
        answers = list(pool.map(send, range(8)))
    assert {answer.status_code for answer in answers} == {201}
    assert len({answer.json["id"] for answer in answers}) == 1
    assert len(service.get("/v1/submissions").json["items"]) == 1
