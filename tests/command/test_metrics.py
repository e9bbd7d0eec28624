"""The figures of running services, as Prometheus reads them; its own parser reads them here."""

from __future__ import annotations

import http.client
import json
import os
import re
import subprocess
import sys
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path

import pytest
from prometheus_client.parser import text_string_to_metric_families

from service.records import migrating
from service.records.database import Database, system_clock
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, add_account
from tests.command.test_serve import refusal

Figures = dict[tuple[str, frozenset[tuple[str, str]]], float]


def read(host: str, port: int, path: str, **headers: str) -> tuple[int, str]:
    connection = http.client.HTTPConnection(host, port, timeout=20)
    connection.request("GET", path, headers=headers)
    answer = connection.getresponse()
    text = answer.read().decode()
    connection.close()
    return answer.status, text


class Process:
    """A service with its two ports."""

    def __init__(self, process: subprocess.Popen[str]) -> None:
        assert process.stderr is not None
        assert process.stdout is not None
        self.process = process
        told = process.stderr.readline()
        self.metrics_port = int(re.findall(r"Metrics at port (\d+) of 127\.0\.0\.1", told)[0])
        self.port = int(process.stdout.readline().rsplit(":", 1)[1])

    def figures(self) -> Figures:
        status, text = read("127.0.0.1", self.metrics_port, "/metrics")
        assert status == 200
        return {
            (sample.name, frozenset(sample.labels.items())): sample.value
            for family in text_string_to_metric_families(text)
            for sample in family.samples
        }

    def post(self, path: str, token: str, body: plant.Body) -> int:
        connection = http.client.HTTPConnection("127.0.0.1", self.port, timeout=60)
        headers = {"Authorization": f"Bearer {token}", "Content-Type": "application/json"}
        connection.request("POST", path, json.dumps(body), headers)
        status = connection.getresponse().status
        connection.close()
        return status


def figure(figures: Figures, name: str, **labels: str) -> float:
    return figures[name, frozenset(labels.items())]


@pytest.fixture
def environment(tmp_path: Path) -> dict[str, str]:
    url = f"sqlite:///{tmp_path / 'store.db'}"
    migrating.migrate(url, now=system_clock())
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        token = add_account(session, database, "submitter")
    database.close()
    settings = {"GAIN_SIGNOFF_DATABASE_URL": url, "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY, "TOKEN": token}
    return os.environ | settings | {"PYTHONUNBUFFERED": "1", "PYTHONDONTWRITEBYTECODE": "1"}


@contextmanager
def serving(environment: dict[str, str]) -> Iterator[Process]:
    command = [sys.executable, "-m", "service.command", "serve", "--port", "0", "--metrics-port", "0"]
    process = subprocess.Popen(
        command, env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    try:
        yield Process(process)
    finally:
        process.kill()
        process.communicate()


def test_each_process_counts_its_own_requests_and_both_tell_the_same_of_the_store(
    environment: dict[str, str],
) -> None:
    token = environment["TOKEN"]
    with ExitStack() as running:
        one, other = (running.enter_context(serving(environment)) for _ in range(2))
        assert one.post("/v1/loops", token, plant.LOOP) == 201
        assert one.post("/v1/submissions", token, plant.SUBMISSION) == 201
        assert one.post("/v1/submissions", "no token", plant.SUBMISSION) == 401
        for _ in range(3):
            assert other.post("/v1/recomputations", token, plant.RECOMPUTATION) == 200
        mine, its = one.figures(), other.figures()
    requests = "gain_signoff_requests_total"
    assert figure(mine, requests, method="POST", route="/v1/submissions", status="201") == 1
    assert figure(mine, requests, method="POST", route="/v1/submissions", status="401") == 1
    assert figure(its, requests, method="POST", route="/v1/recomputations", status="200") == 3
    assert not [labels for name, labels in its if ("route", "/v1/submissions") in labels]
    assert figure(its, "gain_signoff_recomputation_duration_seconds_count") == 3
    assert 0 < figure(its, "gain_signoff_recomputation_duration_seconds_sum") < 30
    spent = figure(mine, "gain_signoff_request_duration_seconds_sum", method="POST", route="/v1/loops")
    assert 0 < spent < 30
    for figures in (mine, its):
        assert figure(figures, "gain_signoff_submissions_total", verdict="no_model") == 1
        assert figure(figures, "gain_signoff_submissions_total", verdict="unstable") == 0
        # the store made, an account, its token, a loop, a submission
        assert figure(figures, "gain_signoff_history_entries") == 5
        assert figure(figures, "gain_signoff_emergency_reviews_overdue") == 0
        assert figure(figures, "gain_signoff_clock_behind_seconds") == 0
        assert figure(figures, "gain_signoff_store_reachable") == 1


def test_the_figures_name_no_loop_and_nobody_and_stand_at_no_other_address(
    environment: dict[str, str],
) -> None:
    with serving(environment) as service:
        assert service.post("/v1/loops", environment["TOKEN"], plant.LOOP) == 201
        read("127.0.0.1", service.port, "/v1/loops/TIC-204?tag=TIC-204", Authorization="Bearer submitter")
        read("127.0.0.1", service.port, "/TIC-204")
        _, text = read("127.0.0.1", service.metrics_port, "/metrics")
        status, _ = read("127.0.0.1", service.port, "/metrics")
    assert status == 404
    assert 'route="none"' in text
    assert "_created" not in text
    assert not re.search(r"TIC|Vanholm|Washing|submitter\b", text)


def test_a_store_that_cannot_be_read_is_told_and_the_rest_goes_on(environment: dict[str, str]) -> None:
    with serving(environment) as service:
        for file in Path(environment["GAIN_SIGNOFF_DATABASE_URL"].removeprefix("sqlite:///")).parent.glob(
            "*"
        ):
            file.write_bytes(b"no database any more") if "-" not in file.name else file.unlink()
        assert read("127.0.0.1", service.port, "/livez")[0] == 200
        assert read("127.0.0.1", service.port, "/readyz")[0] == 503
        figures = service.figures()
    assert figure(figures, "gain_signoff_store_reachable") == 0
    assert "gain_signoff_history_entries" not in {name for name, _ in figures}
    assert figure(figures, "gain_signoff_requests_total", method="GET", route="/readyz", status="503") == 1


def test_a_port_of_the_figures_that_is_taken_is_told_in_one_sentence(environment: dict[str, str]) -> None:
    with serving(environment) as service:
        port = str(service.metrics_port)
        assert f"metrics at 127.0.0.1:{port}" in refusal(environment, "--metrics-port", port)
