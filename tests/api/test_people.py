"""Accounts, passwords and tokens over HTTP."""

from __future__ import annotations

from typing import Any

import pytest
from sqlalchemy import text
from werkzeug.test import TestResponse

from service.context import services
from tests.api import plant
from tests.api.conftest import Decide, Service, password_of
from tests.api.plant import Body
from tests.api.test_openapi import answer_schema, problems

NEW: Body = {
    "name": "m.okafor",
    "full_name": "Mina Okafor",
    "roles": ["submitter"],
    "areas": ["Washing"],
    "new_password": "seven wet bicycles",
}
REASON: Body = {"reason": "Asked for in person."}
ADMINISTRATOR = "administrator"


@pytest.fixture
def second_administrator(service: Service) -> str:
    """Add another administrator; return the account's name, which its token goes by."""
    add(service, name="second_administrator", roles=["administrator"], areas=[])
    return "second_administrator"


def add(service: Service, **changes: Any) -> Body:
    made = service.post("/v1/accounts", NEW | changes, ADMINISTRATOR)
    assert made.status_code == 201, made.text
    body: Body = made.json
    issued = service.post("/v1/tokens", {"account": body["name"], "note": "tests"}, ADMINISTRATOR)
    assert issued.status_code == 201, issued.text
    service.tokens[body["name"]] = issued.json["token"]
    return body


def put(service: Service, name: str, what: str, body: Body, person: str = ADMINISTRATOR) -> TestResponse:
    seen = service.get(f"/v1/accounts/{name}", person)
    headers = {"If-Match": seen.headers["ETag"]} if seen.status_code == 200 else {}
    return service.call("PUT", f"/v1/accounts/{name}/{what}", person, body, headers=headers)


def test_an_account_is_added_and_uses_the_token_that_is_issued_for_it(service: Service) -> None:
    made = add(service)
    assert (made["roles"], made["areas"], made["closed_at"]) == (["submitter"], ["Washing"], None)
    assert "password" not in str(made)
    assert service.get("/v1/accounts/m.okafor", person="m.okafor").json["full_name"] == "Mina Okafor"
    assert service.post("/v1/loops", plant.LOOP, "m.okafor").status_code == 201


def test_a_name_is_never_used_twice(service: Service) -> None:
    add(service)
    service.post("/v1/accounts/m.okafor/closures", REASON, ADMINISTRATOR)
    assert service.post("/v1/accounts", NEW, ADMINISTRATOR).status_code == 409


@pytest.mark.parametrize(
    ("changes", "pointer"),
    [
        ({"new_password": "too short"}, "/new_password"),
        ({"name": "Mina Okafor"}, "/name"),
        ({"roles": []}, "/roles"),
        ({"roles": ["owner"]}, "/roles/0"),
        ({"areas": [""]}, "/areas/0"),
        ({"id": "x"}, "/id"),
        ({"password": "seven wet bicycles"}, "/password"),
    ],
)
def test_an_account_that_cannot_be_is_422_with_its_place(
    service: Service, changes: Body, pointer: str
) -> None:
    answer = service.post("/v1/accounts", NEW | changes, ADMINISTRATOR)
    assert answer.status_code == 422
    assert pointer in [error["pointer"] for error in answer.json["errors"]]


def test_people_see_themselves_and_those_who_look_after_them_see_all(service: Service) -> None:
    for person in (ADMINISTRATOR, "auditor"):
        names = [account["name"] for account in service.get("/v1/accounts", person).json["items"]]
        assert names == sorted(names)
        assert {"submitter", "reviewer", ADMINISTRATOR} <= set(names)
    assert service.get("/v1/accounts/submitter").status_code == 200
    assert service.get("/v1/accounts/reviewer").status_code == 404
    assert service.get("/v1/accounts").status_code == 403


def test_accounts_come_page_by_page_and_the_unused_ones_alone(service: Service) -> None:
    first = service.get("/v1/accounts?limit=3", ADMINISTRATOR)
    assert len(first.json["items"]) == 3
    assert 'rel="next"' in first.headers["Link"]
    assert service.get("/v1/accounts?unused=true", ADMINISTRATOR).json["items"] == []


def test_roles_and_areas_are_changed_by_who_has_seen_them(service: Service) -> None:
    access = {"roles": ["auditor"], "areas": [], "reason": "Moved to the office."}
    path = "/v1/accounts/submitter/access"
    assert service.call("PUT", path, ADMINISTRATOR, access).status_code == 428
    headers = {"If-Match": '"something else"'}
    assert service.call("PUT", path, ADMINISTRATOR, access, headers=headers).status_code == 412
    seen = service.get("/v1/accounts/submitter", ADMINISTRATOR).headers["ETag"]
    changed = put(service, "submitter", "access", access)
    assert (changed.status_code, changed.json["roles"]) == (200, ["auditor"])
    assert changed.headers["ETag"] != seen
    # at the next request
    assert service.post("/v1/loops", plant.LOOP).status_code == 403


def test_a_changed_name_leaves_earlier_signatures_as_they_were(
    service: Service, submission: Body, decide: Decide
) -> None:
    assert decide().status_code == 201
    renamed = put(service, "reviewer", "full-name", {"full_name": "Another Name", "reason": "Married."})
    assert renamed.json["full_name"] == "Another Name"
    (decision,) = service.get(f"/v1/submissions/{submission['id']}").json["decisions"]
    assert decision["signed_by"]["full_name"] == "Reviewer"


def test_a_closed_account_is_nobody(service: Service) -> None:
    closed = service.post("/v1/accounts/submitter/closures", REASON, ADMINISTRATOR)
    assert closed.status_code == 201
    assert closed.json["closed_at"] is not None
    assert service.get("/v1/loops").status_code == 401
    assert service.post("/v1/accounts/submitter/closures", REASON, ADMINISTRATOR).status_code == 409


# --- passwords


def test_ones_own_password_is_changed_with_the_present_one(
    service: Service, submission: Body, decide: Decide
) -> None:
    change = {"present_password": password_of("reviewer"), "new_password": "another battery of mine"}
    assert service.post("/v1/password-changes", change, "reviewer").status_code == 201
    assert decide().status_code == 403
    assert decide(password="another battery of mine").status_code == 201


def test_a_wrong_present_password_changes_nothing_and_is_counted(service: Service) -> None:
    change = {"present_password": password_of("auditor"), "new_password": "another battery of mine"}
    statuses = [service.post("/v1/password-changes", change, "reviewer").status_code for _ in range(6)]
    assert statuses == [403] * 5 + [429]
    events = service.get("/v1/history?kind=password_change_refused", ADMINISTRATOR).json["items"]
    assert len(events) == 5
    assert "another battery" not in str(events)


def test_after_a_reset_that_person_signs_nothing_until_a_second_administrator_confirms(
    service: Service, submission: Body, decide: Decide, second_administrator: str
) -> None:
    reset = {"new_password": "a battery out of a drawer", "reason": "Forgotten."}
    answer = service.post("/v1/accounts/reviewer/password-resets", reset, ADMINISTRATOR)
    assert (answer.status_code, answer.json["signing_suspended"]) == (201, True)
    refused = decide(password="a battery out of a drawer")
    assert (refused.status_code, refused.json["type"]) == (403, "/problems/signing-refused")
    # changing it is no way round
    change = {"present_password": "a battery out of a drawer", "new_password": "another battery of mine"}
    assert service.post("/v1/password-changes", change, "reviewer").status_code == 201
    assert decide(password="another battery of mine").status_code == 403
    path = "/v1/accounts/reviewer/password-reset-confirmations"
    assert service.post(path, REASON, ADMINISTRATOR).status_code == 403
    confirmed = service.post(path, REASON, second_administrator)
    assert (confirmed.status_code, confirmed.json["signing_suspended"]) == (201, False)
    assert decide(password="another battery of mine").status_code == 201
    assert service.post(path, REASON, second_administrator).status_code == 409


def test_nobody_resets_their_own_password(service: Service) -> None:
    reset = {"new_password": "a battery out of a drawer", "reason": "Forgotten."}
    path = f"/v1/accounts/{ADMINISTRATOR}/password-resets"
    assert service.post(path, reset, ADMINISTRATOR).status_code == 403


def test_no_password_is_kept_anywhere_but_hashed(service: Service) -> None:
    key = {"Idempotency-Key": "one"}
    first = service.post("/v1/accounts", NEW, ADMINISTRATOR, headers=key)
    again = service.post(
        "/v1/accounts", NEW | {"new_password": "another wet bicycle"}, ADMINISTRATOR, headers=key
    )
    # the fingerprint leaves it out: a quick hash of a password could be guessed from
    assert (again.status_code, again.data) == (201, first.data)
    with service.app.app_context(), services().database.reading() as session:
        for query in ("SELECT body FROM idempotency_keys", "SELECT canonical FROM history_events"):
            kept = [bytes(value) for value in session.execute(text(query)).scalars()]
            assert kept
            assert not any(b"bicycle" in value for value in kept)


# --- tokens


def test_a_token_is_shown_once_and_never_again(service: Service) -> None:
    body = {"account": "submitter", "note": "tuning tool"}
    key = {"Idempotency-Key": "one"}
    first = service.post("/v1/tokens", body, ADMINISTRATOR, headers=key).json
    again = service.post("/v1/tokens", body, ADMINISTRATOR, headers=key).json
    assert first["token"].startswith(first["entry"]["id"])
    assert again == first | {"token": None}
    listed = service.get("/v1/tokens?account=submitter").json["items"]
    assert first["entry"]["id"] in [token["id"] for token in listed]
    secret = first["token"].partition(".")[2]
    assert secret not in str(listed)
    with service.app.app_context(), services().database.reading() as session:
        kept = session.execute(text("SELECT body FROM idempotency_keys")).scalars()
        assert not any(secret.encode() in bytes(body) for body in kept)


def test_a_token_notes_its_last_use(service: Service) -> None:
    service.get("/v1/loops", "reviewer")
    (token,) = service.get("/v1/tokens?account=reviewer", ADMINISTRATOR).json["items"]
    assert token["last_used_at"] is not None


def test_a_revoked_token_is_unknown_at_the_next_request(service: Service) -> None:
    identifier = service.tokens["submitter"].partition(".")[0]
    path = f"/v1/tokens/{identifier}/revocations"
    assert service.post(path, REASON, "reviewer").status_code == 404
    assert service.post(path, {}, "submitter").status_code == 422
    revoked = service.post(path, REASON)
    assert revoked.status_code == 201
    assert revoked.json["revoked_at"] is not None
    assert service.get("/v1/loops").status_code == 401
    assert service.post(path, REASON, ADMINISTRATOR).status_code == 409


def test_others_tokens_are_for_those_who_look_after_them(service: Service) -> None:
    assert service.get("/v1/tokens", ADMINISTRATOR).status_code == 200
    assert service.get("/v1/tokens", "auditor").status_code == 200
    assert service.get("/v1/tokens").status_code == 403
    assert service.get("/v1/tokens?account=reviewer").status_code == 403
    assert service.post("/v1/tokens", {"account": "submitter", "note": "x"}).status_code == 403


def test_each_change_of_people_is_one_entry_with_its_reason(service: Service) -> None:
    def entries() -> list[Body]:
        items: list[Body] = service.get("/v1/history?limit=200", "auditor").json["items"]
        return items

    reset = {"new_password": "a battery out of a drawer", "reason": "Forgotten."}
    access = {"roles": ["auditor"], "areas": [], "reason": "Moved."}
    name = {"full_name": "Another Name", "reason": "Married."}
    for kind, change in (
        ("account_access_changed", lambda: put(service, "submitter", "access", access)),
        ("account_renamed", lambda: put(service, "submitter", "full-name", name)),
        (
            "password_reset",
            lambda: service.post("/v1/accounts/submitter/password-resets", reset, ADMINISTRATOR),
        ),
        (
            "account_closed",
            lambda: service.post("/v1/accounts/submitter/closures", REASON, ADMINISTRATOR),
        ),
    ):
        before = len(entries())
        assert change().status_code in (200, 201)
        (added,) = entries()[before:]
        assert (added["kind"], added["actor"]) == (kind, ADMINISTRATOR)
        assert added["content"]["reason"]


def test_people_are_as_described(service: Service) -> None:
    description = service.get("/v1/openapi.json", person=None).json
    made = service.post("/v1/accounts", NEW, ADMINISTRATOR).json
    issued = service.post("/v1/tokens", {"account": "m.okafor", "note": "tests"}, ADMINISTRATOR).json
    assert problems(description, answer_schema(description, "/v1/accounts", "post", "201"), made) == []
    assert problems(description, answer_schema(description, "/v1/tokens", "post", "201"), issued) == []
    for path in ("/v1/accounts", "/v1/tokens"):
        found = service.get(path, ADMINISTRATOR).json
        assert problems(description, answer_schema(description, path), found) == []


def test_the_examples_of_people_run(service: Service, second_administrator: str) -> None:
    description = service.get("/v1/openapi.json", person=None).json

    def example(name: str) -> Body:
        shown: Body = description["components"]["schemas"][name]["examples"][0]
        return shown

    account = example("AccountRequest")
    name, path = account["name"], f"/v1/accounts/{account['name']}"
    assert service.post("/v1/accounts", account, ADMINISTRATOR).status_code == 201
    issued = service.post("/v1/tokens", example("TokenRequest"), ADMINISTRATOR)
    service.tokens[name] = issued.json["token"]
    assert put(service, name, "access", example("AccessRequest")).status_code == 200
    assert put(service, name, "full-name", example("FullNameRequest")).status_code == 200
    reset = example("PasswordResetRequest")
    assert service.post(f"{path}/password-resets", reset, ADMINISTRATOR).status_code == 201
    reason = example("ReasonRequest")
    confirmation = f"{path}/password-reset-confirmations"
    assert service.post(confirmation, reason, second_administrator).status_code == 201
    change = example("PasswordChangeRequest") | {"present_password": reset["new_password"]}
    assert service.post("/v1/password-changes", change, name).status_code == 201
    assert service.post(f"{path}/closures", reason, ADMINISTRATOR).status_code == 201
