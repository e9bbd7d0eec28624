"""When the store cannot be used, and when too many passwords were wrong: nothing half done, nothing told."""

from __future__ import annotations

import pytest
from sqlalchemy import event
from sqlalchemy.exc import OperationalError

from service.context import services
from service.records import loops
from tests.api import plant
from tests.api.conftest import Decide, Service
from tests.databases import Databases, is_sqlite, without_guards


def test_after_too_many_wrong_passwords_the_right_one_waits_too(decide: Decide) -> None:
    refused = [decide(password="wrong battery of reviewer") for _ in range(12)]
    assert refused[0].status_code == 403
    last = refused[-1]
    assert (last.status_code, last.json["type"]) == (429, "/problems/too-many-requests")
    assert int(last.headers["Retry-After"]) > 0
    assert decide().status_code == 429


def test_a_store_that_is_gone_is_503_with_an_identifier_alone(service: Service, databases: Databases) -> None:
    if is_sqlite(service.url):
        # a deleted file would still be there for whoever has it open
        without_guards(service.url, "DROP TABLE tokens")
    else:
        databases.drop(service.url)
    answer = service.get("/v1/loops")
    assert (answer.status_code, answer.json["type"]) == (503, "/problems/unavailable")
    assert set(answer.json) == {"type", "title", "status", "instance"}
    assert int(answer.headers["Retry-After"]) > 0


def test_readiness_sees_a_store_that_is_not_current(service: Service) -> None:
    without_guards(service.url, "DELETE FROM alembic_version")
    assert service.get("/readyz", person=None).status_code == 503
    assert service.get("/livez", person=None).status_code == 200


def test_a_fault_of_the_services_own_shows_an_identifier_and_is_rolled_back(
    service: Service, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    register = loops.register

    def register_and_fail(*arguments: object) -> None:
        register(*arguments)  # type: ignore[arg-type]
        raise RuntimeError("the secret of the fault")

    before = service.rows()
    monkeypatch.setattr(loops, "register", register_and_fail)
    answer = service.post("/v1/loops", plant.LOOP)
    assert (answer.status_code, answer.json["type"]) == (500, "/problems/internal-error")
    assert set(answer.json) == {"type", "title", "status", "instance"}
    assert "secret" not in answer.text
    assert answer.headers["X-Request-Id"] in caplog.text
    assert service.rows() == before


def test_whichever_statement_of_a_submission_fails_all_or_nothing_is_kept(
    service: Service, loop_id: str
) -> None:
    with service.app.app_context():
        engine = services().database._writer
    before = service.rows()
    seen = 0

    def fail_at(number: int) -> None:
        nonlocal seen
        seen = 0

        def count(_connection: object, _cursor: object, statement: str, *_: object) -> None:
            nonlocal seen
            seen += 1
            if seen == number:
                raise OperationalError(statement, None, Exception("disk I/O error"))

        event.listen(engine, "before_cursor_execute", count)
        try:
            answer = service.post("/v1/submissions", plant.SUBMISSION, headers={"Idempotency-Key": "one"})
        finally:
            event.remove(engine, "before_cursor_execute", count)
        statuses.append(answer.status_code)

    statuses: list[int] = []
    while not statuses or statuses[-1] != 201:
        fail_at(len(statuses) + 1)
        if statuses[-1] != 201:
            assert service.rows() == before
    assert len(statuses) > 5
    assert set(statuses[:-1]) <= {500, 503}
    assert len(service.get("/v1/submissions").json["items"]) == 1
