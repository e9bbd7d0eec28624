"""The service or its database is killed at random moments while records come in; no acknowledged one is lost.

    python -m tests.faults.killing --database postgresql --cycles 200
    python -m tests.faults.killing --database sqlite --cycles 200

A cycle: the service runs as a process of its own, several clients post models and gains, each request under
an Idempotency-Key. At a random moment the service gets SIGKILL, or PostgreSQL is stopped at once. Both are
started again; every request without an answer is sent again under its key; then every record has to be there
exactly once, and the history has to verify. Commits reach the disk as in a plant. A power cut is not tried
here: what the disk itself forgets, no program can see.
"""

from __future__ import annotations

import argparse
import collections
import http.client
import itertools
import json
import os
import random
import signal
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO, Any
from urllib.parse import urlsplit

from service.records import migrating
from service.records.database import Database, system_clock
from service.verification.verifier import verify
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, add_account
from tests.clusters import Cluster
from tests.databases import Databases, PostgresqlDatabases, SqliteFiles, opened, run

CLIENTS = 6
LOAD_S = (0.1, 1.5)
"""How long a load runs before something dies: a random time between these."""

GAINS = plant.SUBMISSION | {"loop": {"site": plant.LOOP["site"], "tag": "TIC-2"}}
ANSWER_S_MAX = 30.0
RETRIES_MAX = 40


@dataclass(frozen=True)
class Request:
    """One post. Its marker stands in the record that it makes, and is its Idempotency-Key."""

    marker: str
    path: str
    body: dict[str, Any]


@dataclass
class Figures:
    """What a run has counted."""

    cycles: int = 0
    service_killed: int = 0
    database_stopped: int = 0
    acknowledged: int = 0
    unanswered: int = 0
    committed_without_an_answer: int = 0
    lost: int = 0
    duplicates: int = 0
    entries: int = 0

    def __str__(self) -> str:
        return ", ".join(f"{name.replace('_', ' ')} {value}" for name, value in vars(self).items())


@dataclass
class Service:
    """The service as a process, started again after each death at a port of its own choice."""

    url: str
    process: subprocess.Popen[str] | None = None
    port: int = 0
    log: int | IO[str] = subprocess.DEVNULL

    def start(self) -> None:
        settings = {"GAIN_SIGNOFF_DATABASE_URL": self.url, "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY}
        self.process = subprocess.Popen(
            [sys.executable, "-m", "service.command", "serve", "--port", "0"],
            env=os.environ | settings | {"PYTHONUNBUFFERED": "1"},
            cwd=Path(__file__).parents[2],
            stdout=subprocess.PIPE,
            stderr=self.log,
            text=True,
        )
        assert self.process.stdout is not None
        address = urlsplit(self.process.stdout.readline().removeprefix("Serving at ").strip())
        assert address.port, "the service did not start"
        self.port = address.port

    def kill(self) -> None:
        assert self.process is not None
        self.process.kill()
        self.process.communicate()

    def post(self, request: Request, token: str) -> int | None:
        """Send a request; return its status, None where no answer came."""
        headers = {
            "Authorization": f"Bearer {token}",
            "Content-Type": "application/json",
            "Idempotency-Key": request.marker,
        }
        connection = http.client.HTTPConnection("127.0.0.1", self.port, timeout=ANSWER_S_MAX)
        try:
            connection.request("POST", request.path, json.dumps(request.body), headers)
            response = connection.getresponse()
            response.read()
        except (OSError, http.client.HTTPException):
            return None
        else:
            return response.status
        finally:
            connection.close()


@dataclass
class Run:
    """One store under fire. `stop_database` and `start_database` are None where it lives in the service."""

    url: str
    random: random.Random
    stop_database: Callable[[], None] | None = None
    start_database: Callable[[], None] | None = None
    figures: Figures = field(default_factory=Figures)

    def __post_init__(self) -> None:
        migrating.migrate(self.url, now=system_clock())
        database = Database.open(self.url, password_hasher=CHEAP)
        with database.writing() as session:
            self.token = add_account(session, database, "submitter")
        database.close()
        self.service = Service(self.url)
        self._markers = itertools.count(1)
        self._acknowledged: set[str] = set()
        self._pending: list[Request] = []
        self._found: collections.Counter[str] = collections.Counter()
        self._seen_up_to = 0
        self._refused: list[str] = []
        self._lock = threading.Lock()

    def go(self, cycles: int, tell: Callable[[str], None] = lambda _text: None) -> Figures:
        """Run so many cycles; return what was counted."""
        self.service.start()
        try:
            self._models_of = self._register("TIC-1")
            # gains of another loop: they are refused where the models change while they are recomputed
            self._register("TIC-2")
            for _ in range(cycles):
                self._cycle()
                tell(str(self.figures))
        finally:
            self.service.kill()
        return self.figures

    def _register(self, tag: str) -> str:
        connection = http.client.HTTPConnection("127.0.0.1", self.service.port, timeout=ANSWER_S_MAX)
        headers = {"Authorization": f"Bearer {self.token}", "Content-Type": "application/json"}
        connection.request("POST", "/v1/loops", json.dumps(plant.LOOP | {"tag": tag}), headers)
        loop = json.loads(connection.getresponse().read())["id"]
        connection.request("POST", f"/v1/loops/{loop}/models", json.dumps(plant.MODEL), headers)
        connection.getresponse().read()
        connection.close()
        return f"/v1/loops/{loop}/models"

    def _cycle(self) -> None:
        over = threading.Event()
        clients = [threading.Thread(target=self._post_until, args=(over,)) for _ in range(CLIENTS)]
        for client in clients:
            client.start()
        time.sleep(self.random.uniform(*LOAD_S))
        if self.stop_database and self.start_database and self.random.random() < 0.5:
            self.stop_database()
            self.figures.database_stopped += 1
            over.set()
            self.start_database()
        else:
            self.service.kill()
            self.figures.service_killed += 1
            over.set()
            self.service.start()
        for client in clients:
            client.join()
        assert self._refused == []
        self._count()
        self.figures.unanswered += len(self._pending)
        self.figures.committed_without_an_answer += sum(
            self._found[each.marker] > 0 for each in self._pending
        )
        self._send_again()
        self._count()
        self._judge()

    def _post_until(self, over: threading.Event) -> None:
        """Post one request after another until something has died."""
        while not over.is_set():
            request = self._request()
            status = self.service.post(request, self.token)
            with self._lock:
                if status == 201:
                    self._acknowledged.add(request.marker)
                    continue
                self._pending.append(request)
                if status is not None and status < 500:
                    self._refused.append(f"{request.path} was refused with {status}")
            return

    def _request(self) -> Request:
        with self._lock:
            number = next(self._markers)
        marker = f"marker-{number}"
        if number % 5:
            return Request(marker, self._models_of, plant.MODEL | {"evidence": marker})
        return Request(marker, "/v1/submissions", GAINS | {"reason": marker})

    def _send_again(self) -> None:
        for request in self._pending:
            for _ in range(RETRIES_MAX):
                status = self.service.post(request, self.token)
                if status == 201:
                    break
                time.sleep(0.1)
            assert status == 201, f"{request.path} sent again was answered with {status}"
            self._acknowledged.add(request.marker)
        self._pending.clear()

    def _count(self) -> None:
        """Count markers in what has been kept since the last count."""
        with opened(self.url) as connection:
            since = (self._seen_up_to,)
            models = "SELECT event_number, content FROM loop_models WHERE event_number > ?"
            gains = "SELECT event_number, reason FROM submissions WHERE event_number > ?"
            rows = [(number, json.loads(raw)["evidence"]) for number, raw in run(connection, (models, since))]
            rows += [(number, reason) for number, reason in run(connection, (gains, since))]
        self._found.update(marker for _, marker in rows)
        self._seen_up_to = max((number for number, _ in rows), default=self._seen_up_to)

    def _judge(self) -> None:
        figures = self.figures
        figures.cycles += 1
        figures.acknowledged = len(self._acknowledged)
        figures.lost = sum(self._found[marker] == 0 for marker in self._acknowledged)
        figures.duplicates = sum(self._found[marker] > 1 for marker in self._acknowledged)
        report = verify(self.url)
        assert report.holds, report.fault
        figures.entries = report.entries
        assert (figures.lost, figures.duplicates) == (0, 0), str(figures)


def on_sqlite(folder: Path, seed: int) -> Run:
    """A run on a SQLite file: the service is all that can die."""
    return Run(SqliteFiles(folder).new(), random.Random(seed))  # noqa: S311  no secret is made of it


def on_postgresql(cluster: Cluster, seed: int) -> Run:
    """A run on a durable server, which dies as often as the service does."""
    databases: Databases = PostgresqlDatabases(cluster)
    chance = random.Random(seed)  # noqa: S311
    return Run(databases.new(), chance, lambda: cluster.stop(signal.SIGQUIT), cluster.start)


def main() -> None:
    """Run and print the figures."""
    parser = argparse.ArgumentParser(description="Kill the service or its database under load.")
    parser.add_argument("--database", choices=("sqlite", "postgresql"), required=True)
    parser.add_argument("--cycles", type=int, default=200)
    parser.add_argument("--seed", type=int, default=random.SystemRandom().randrange(10**6))
    asked = parser.parse_args()
    print(f"seed {asked.seed}")
    if asked.database == "sqlite":
        with tempfile.TemporaryDirectory() as folder:
            on_sqlite(Path(folder), asked.seed).go(asked.cycles, print)
        return
    cluster = Cluster(durable=True)
    try:
        on_postgresql(cluster, asked.seed).go(asked.cycles, print)
    finally:
        cluster.remove()


if __name__ == "__main__":
    main()
