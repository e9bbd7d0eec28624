"""A store that is really read-only, or really full: 503, nothing half done, and work goes on afterwards.

What needs a file system of its own (PostgreSQL without room, a remount) was tried by hand.
"""

from __future__ import annotations

import resource
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager

import pytest
from sqlalchemy import event

from service.app import create_app
from service.context import services
from service.settings import Settings
from service.verification.verifier import verify
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, Service
from tests.databases import PostgresqlDatabases, file_of, opened, run

POST = "/v1/submissions"
KEYED = {"Idempotency-Key": "one"}

on_sqlite = pytest.mark.parametrize("databases", ["sqlite"], indirect=True)
on_postgresql = pytest.mark.parametrize("databases", ["postgresql"], indirect=True)


def _is_unavailable(service: Service) -> None:
    answer = service.post(POST, plant.SUBMISSION, headers=KEYED)
    assert (answer.status_code, answer.json["type"]) == (503, "/problems/unavailable"), answer.text
    assert set(answer.json) == {"type", "title", "status", "instance"}
    assert int(answer.headers["Retry-After"]) > 0


def _works(service: Service, before: dict[str, int]) -> None:
    """Nothing was left behind; the same request under its key makes one record, and all of it verifies."""
    assert service.rows() == before
    made = service.post(POST, plant.SUBMISSION, headers=KEYED)
    assert made.status_code == 201, made.text
    assert service.post(POST, plant.SUBMISSION, headers=KEYED).json["id"] == made.json["id"]
    assert len(service.get(POST).json["items"]) == 1
    report = verify(service.url)
    assert report.holds, report.fault


# --- read-only


@on_sqlite
def test_a_file_that_may_only_be_read(service: Service, loop_id: str) -> None:
    before = service.rows()
    url = f"sqlite:///file:{file_of(service.url)}?mode=ro&uri=true"
    app = create_app(Settings(database_url=url, secret_key=SECRET_KEY), password_hasher=CHEAP)
    reader = Service(app, url, service.tokens)
    _is_unavailable(reader)
    assert reader.get(f"/v1/loops/{loop_id}").status_code == 200
    with app.app_context():
        services().database.close()
    _works(service, before)


@on_postgresql
def test_a_database_that_was_set_read_only(
    service: Service, loop_id: str, databases: PostgresqlDatabases
) -> None:
    before = service.rows()
    with databases.read_only(service.url):
        for _ in range(3):
            _is_unavailable(service)
        # the use of this token is due to be noted, and cannot be
        assert service.get(f"/v1/loops/{loop_id}", "auditor").status_code == 200
    _works(service, before)


# --- full


@contextmanager
def _no_more_pages(service: Service) -> Iterator[None]:
    """SQLite takes no page beyond those it has: the answer that it gives to a full disk as well."""
    with service.app.app_context():
        engine = services().database._writer
    with opened(service.url) as connection:
        ((pages,),) = run(connection, "PRAGMA page_count")

    def limit(connection: object, _record: object, _proxy: object) -> None:
        connection.execute(f"PRAGMA max_page_count = {pages}").close()  # type: ignore[attr-defined]

    event.listen(engine, "checkout", limit)
    try:
        yield
    finally:
        event.remove(engine, "checkout", limit)
        engine.dispose()


@contextmanager
def _no_larger_file(service: Service) -> Iterator[None]:
    """The operating system lets no file of this process grow past the log that SQLite writes to."""
    log = file_of(service.url).with_name(f"{file_of(service.url).name}-wal")
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (log.stat().st_size + 4096, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


@on_sqlite
@pytest.mark.parametrize("full", [_no_more_pages, _no_larger_file])
def test_a_disk_without_room(
    service: Service, loop_id: str, full: Callable[[Service], AbstractContextManager[None]]
) -> None:
    before = service.rows()
    with full(service):
        _is_unavailable(service)
        _is_unavailable(service)
        assert service.get(f"/v1/loops/{loop_id}").status_code == 200
    _works(service, before)
