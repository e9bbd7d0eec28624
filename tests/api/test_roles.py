"""Who may do what: every operation that changes something, tried by every role."""

from __future__ import annotations

from typing import Any

import pytest

from service.context import services
from service.records import accounts, submissions, tokens
from service.records.roles import CONSOLE
from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body

MAY: dict[str, set[str]] = {
    "register": {"submitter", "administrator"},
    "change": {"submitter", "administrator"},
    "add a model": {"submitter", "administrator"},
    "submit": {"submitter"},
    "reject": {"reviewer"},
    "install": {"submitter"},
    "recompute": {"submitter", "reviewer", "auditor", "administrator"},
}
"""interface.md section 5, the table of roles."""

ROLES = ("submitter", "reviewer", "auditor", "administrator")


def attempt(service: Service, what: str, who: str, loop_id: str, submission: Body) -> int:
    """Try one operation as one role; return its status."""
    path, own = f"/v1/loops/{loop_id}", f"/v1/submissions/{submission['id']}"
    rejection = {
        "decision": "reject",
        "reason": "The settling time is not what was agreed.",
        "content_digest": submission["content_digest"],
        "password": password_of(who),
    }
    match what:
        case "register":
            answer = service.post("/v1/loops", plant.LOOP | {"tag": "TIC-999"}, person=who)
        case "change":
            headers = {"If-Match": '"revision-1"'}
            answer = service.call("PUT", path, who, plant.LOOP, headers=headers)
        case "add a model":
            answer = service.post(f"{path}/models", plant.MODEL, person=who)
        case "submit":
            answer = service.post("/v1/submissions", plant.SUBMISSION, person=who)
        case "reject":
            answer = service.post(f"{own}/decisions", rejection, person=who)
        case "install":
            answer = service.post(f"{own}/installations", plant.installed_now(), person=who)
        case _:
            answer = service.post("/v1/recomputations", plant.RECOMPUTATION, person=who)
    return answer.status_code


@pytest.mark.parametrize("role", ROLES)
@pytest.mark.parametrize("what", MAY)
def test_a_role_may_do_what_is_written_and_nothing_else(
    service: Service, loop_id: str, submission: Body, what: str, role: str
) -> None:
    before = service.rows()
    status = attempt(service, what, role, loop_id, submission)
    if role in MAY[what]:
        # nothing is approved yet, so that installing is allowed by role and refused by state
        assert status == (409 if what == "install" else 200 if what in ("change", "recompute") else 201)
    else:
        assert status == 403
        assert service.rows() == before


@pytest.mark.parametrize("role", ROLES)
def test_every_role_reads_the_records(service: Service, loop_id: str, submission: Body, role: str) -> None:
    paths = (
        f"/v1/loops/{loop_id}",
        f"/v1/submissions/{submission['id']}",
        f"/v1/submissions/{submission['id']}/sheet.pdf",
        "/v1/history",
        "/v1/history/checkpoint",
    )
    assert {service.get(path, person=role).status_code for path in paths} == {200}


def test_entries_about_people_are_for_auditors_and_administrators(service: Service, loop_id: str) -> None:
    def kinds(person: str) -> set[str]:
        events = service.get("/v1/history?limit=200", person=person).json["items"]
        return {event["kind"] for event in events}

    assert "account_added" in kinds("auditor")
    assert "account_added" in kinds("administrator")
    assert "account_added" not in kinds("submitter")
    assert service.get("/v1/history/2", person="submitter").status_code == 404


def test_a_role_that_is_taken_away_is_gone_at_the_next_request(service: Service, loop_id: str) -> None:
    assert service.post("/v1/submissions", plant.SUBMISSION).status_code == 201
    with service.app.app_context():
        database = services().database
        with database.writing() as session:
            now = database.now()
            accounts.change_access(session, CONSOLE, "submitter", ("auditor",), (), "moved", now)
    assert service.post("/v1/submissions", plant.SUBMISSION).status_code == 403


def test_a_role_that_is_taken_away_while_the_gains_are_recomputed_is_gone_too(
    service: Service, loop_id: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    prepare = submissions.prepare

    def prepare_while_another_takes_the_role_away(*arguments: Any) -> Any:
        prepared = prepare(*arguments)
        database = services().database
        with database.writing() as session:
            now = database.now()
            accounts.change_access(session, CONSOLE, "submitter", ("auditor",), (), "moved", now)
        return prepared

    monkeypatch.setattr(submissions, "prepare", prepare_while_another_takes_the_role_away)
    assert service.post("/v1/submissions", plant.SUBMISSION).status_code == 403
    assert service.get("/v1/submissions").json["items"] == []


def test_a_token_that_is_revoked_is_unknown_at_the_next_request(service: Service) -> None:
    assert service.get("/v1/loops").status_code == 200
    with service.app.app_context():
        database = services().database
        with database.writing() as session:
            identifier = service.tokens["submitter"].split(".")[0]
            tokens.revoke(session, CONSOLE, identifier, "lost", database.now())
    assert service.get("/v1/loops").status_code == 401
