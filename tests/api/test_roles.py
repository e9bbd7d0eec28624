"""Roles as they hold at each request; which role may do what is tried in `test_role_matrix`."""

from __future__ import annotations

from typing import Any

import pytest

from service.context import services
from service.records import accounts, submissions, tokens
from service.records.roles import CONSOLE
from tests.api import plant
from tests.api.conftest import Service


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
