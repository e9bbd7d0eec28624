"""A short run of hostile requests with every test run, and what its judges see."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from pathlib import Path

import pytest

from service.api import openapi
from service.app import create_app
from service.context import services_of
from service.records import migrating
from service.records.database import system_clock
from service.settings import Settings
from tests.api.conftest import SECRET_KEY
from tests.databases import SqliteFiles
from tests.faults.conformance import Answer, Description
from tests.faults.fuzzing import Run
from tests.faults.hostile_loops import HostileLoops
from tests.faults.watched_process import MIB, Watched

REQUESTS = 150


def test_hostile_requests_break_nothing_and_take_no_more_than_they_may(tmp_path: Path) -> None:
    figures = Run(SqliteFiles(tmp_path).new(), seed=1).go(REQUESTS)
    assert figures.broken == []
    assert figures.requests >= REQUESTS
    assert {200, 400, 401, 404, 422} <= set(figures.statuses)


def test_the_same_seed_draws_the_same_loops_and_another_draws_others() -> None:
    def drawn(seed: int) -> list[str]:
        loops = HostileLoops(seed)
        return [json.dumps(loops.request(), allow_nan=False) for _ in range(20)]

    assert drawn(1) == drawn(1)
    assert set(drawn(1)).isdisjoint(drawn(2))


def test_time_and_memory_of_a_process_are_seen() -> None:
    own = Watched(os.getpid())
    own.forget_peak()
    before_s, before_mib = own.cpu_s, own.resident_mib
    taken = bytearray(os.urandom(1) * int(80 * MIB))
    assert own.peak_mib - before_mib > 70
    del taken
    own.forget_peak()
    assert own.peak_mib - before_mib < 40
    while own.cpu_s - before_s < 0.05:
        sum(range(10_000))


PROBLEM = {"type": "/problems/not-found", "title": "x", "status": 404, "instance": "urn:uuid:1"}
JSON, REFUSED = "application/json", "application/problem+json"


def answer(status: int, media_type: str, body: object) -> Answer:
    raw = body if isinstance(body, bytes) else json.dumps(body).encode()
    return Answer(status, {"content-type": media_type}, raw)


@pytest.mark.parametrize(
    ("path", "given", "departure"),
    [
        ("/v1/loops", answer(200, JSON, {"items": []}), None),
        ("/v1/loops", answer(500, REFUSED, PROBLEM | {"status": 500}), "the answer is 500"),
        ("/loops", answer(500, "text/html", b""), "the answer is 500"),
        ("/v1/loops", answer(418, REFUSED, PROBLEM | {"status": 418}), "418 is not described here"),
        ("/v1/loops", answer(200, "text/html", b""), "text/html is not described here"),
        ("/v1/loops", answer(200, JSON, {"things": []}), "required"),
        ("/v1/loops", answer(200, JSON, b'{"items": NaN}'), "NaN is no number"),
        ("/v1/loops/x", answer(404, "text/html", b"no"), "a refusal is text/html"),
        ("/v1/loops/x", answer(404, REFUSED, PROBLEM | {"status": 403}), "another status"),
        ("/v1/nowhere", answer(200, JSON, {}), "not described"),
        ("/v1/nowhere", answer(404, REFUSED, PROBLEM), None),
    ],
)
def test_an_answer_that_the_description_does_not_promise_is_seen(
    description: Description, path: str, given: Answer, departure: str | None
) -> None:
    found = list(description.departures("GET", path, given))
    if departure is None:
        assert found == []
    else:
        assert any(departure in each for each in found), found


@pytest.fixture(scope="module")
def description(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Description]:
    url = SqliteFiles(tmp_path_factory.mktemp("described")).new()
    migrating.migrate(url, now=system_clock())
    app = create_app(Settings(database_url=url, secret_key=SECRET_KEY))
    yield Description(openapi.description(app))
    services_of(app).database.close()
