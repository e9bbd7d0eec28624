"""Ready is what can do its work; alive is what answers."""

from __future__ import annotations

from datetime import timedelta

import pytest
from flask import Flask

from service.app import create_app
from service.context import services_of
from service.records import migrating
from service.records.database import system_clock
from service.settings import Settings
from tests.api.conftest import SECRET_KEY, Service
from tests.databases import Databases, without_guards


def status(app: Flask, path: str) -> int:
    return app.test_client().get(path).status_code


def test_a_store_in_order_is_ready(service: Service) -> None:
    assert status(service.app, "/readyz") == 200
    assert status(service.app, "/livez") == 200


def test_a_store_of_an_earlier_schema_is_not_ready(
    service: Service, caplog: pytest.LogCaptureFixture
) -> None:
    without_guards(service.url, "UPDATE alembic_version SET version_num = 'an_earlier_one'")
    answer = service.get("/readyz", person=None)
    assert answer.status_code == 503
    assert "schema" not in answer.text
    assert "gain-signoff migrate" in caplog.text
    assert status(service.app, "/livez") == 200


@pytest.mark.parametrize(("behind", "expected"), [(timedelta(minutes=4), 200), (timedelta(hours=1), 503)])
def test_a_clock_that_was_set_back_is_not_ready_until_the_history_goes_on(
    databases: Databases, caplog: pytest.LogCaptureFixture, behind: timedelta, expected: int
) -> None:
    url = databases.new()
    migrating.migrate(url, now=system_clock() + behind)
    app = create_app(Settings(database_url=url, secret_key=SECRET_KEY))
    assert status(app, "/readyz") == expected
    assert ("the clock says" in caplog.text) is (expected == 503)
    services_of(app).database.close()
    databases.drop(url)
