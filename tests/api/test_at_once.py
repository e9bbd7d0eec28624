"""Two people at once, on a server in a process of its own: one is done, one is told of the conflict."""

from __future__ import annotations

import http.client
import json
import os
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import count
from threading import Barrier
from typing import Any

import pytest

from tests.api import plant
from tests.api.conftest import SECRET_KEY, Kept, password_of
from tests.api.plant import Body
from tests.command.test_serve import serving
from tests.databases import Databases

NUMBERS = count(700)


@dataclass(frozen=True)
class Server:
    """A running server, and the tokens of those who call it."""

    host: str
    port: int
    tokens: dict[str, str]

    def call(
        self, method: str, path: str, person: str, body: object = None, **headers: str
    ) -> tuple[int, Any]:
        connection = http.client.HTTPConnection(self.host, self.port, timeout=60)
        headers |= {"Authorization": f"Bearer {self.tokens[person]}"}
        headers |= {"Content-Type": "application/json"} if body is not None else {}
        connection.request(method, path, None if body is None else json.dumps(body), headers)
        answer = connection.getresponse()
        found = json.loads(answer.read())
        connection.close()
        return answer.status, found

    def post(self, path: str, person: str, body: object, **headers: str) -> tuple[int, Any]:
        return self.call("POST", path, person, body, **headers)


@pytest.fixture(scope="module")
def server(kept: Kept, databases: Databases) -> Iterator[Server]:
    url = databases.copy_of(kept.url)
    settings = {"GAIN_SIGNOFF_DATABASE_URL": url, "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY}
    environment = os.environ | settings | {"PYTHONUNBUFFERED": "1", "PYTHONDONTWRITEBYTECODE": "1"}
    with serving(environment) as (_, host, port):
        yield Server(host, port, kept.tokens)
    databases.drop(url)


@pytest.fixture
def submission(server: Server) -> Body:
    """Gains for a loop of this test's own."""
    tag = {"tag": f"TIC-{next(NUMBERS)}"}
    status, loop = server.post("/v1/loops", "submitter", plant.LOOP | tag)
    assert status == 201
    assert server.post(f"/v1/loops/{loop['id']}/models", "submitter", plant.MODEL)[0] == 201
    gains = plant.SUBMISSION | {"loop": plant.SUBMISSION["loop"] | tag}
    status, made = server.post("/v1/submissions", "submitter", gains)
    assert status == 201
    body: Body = made
    return body


def signed(server: Server, path: str, person: str, decision: str, digest: str, start: Barrier) -> int:
    body = {"decision": decision, "reason": "Read against the limits.", "content_digest": digest}
    start.wait()
    return server.post(path, person, body | {"password": password_of(person)})[0]


def at_once(server: Server, path: str, digest: str, decisions: tuple[str, str]) -> list[int]:
    start = Barrier(2)
    with ThreadPoolExecutor(2) as pool:
        people = zip(("reviewer", "second_reviewer"), decisions, strict=True)
        sent = [pool.submit(signed, server, path, who, what, digest, start) for who, what in people]
        return sorted(each.result() for each in sent)


@pytest.mark.parametrize("decisions", [("approve", "approve"), ("approve", "reject"), ("reject", "reject")])
def test_of_two_reviewers_who_decide_at_once_one_wins(
    server: Server, submission: Body, decisions: tuple[str, str]
) -> None:
    path = f"/v1/submissions/{submission['id']}"
    statuses = at_once(server, f"{path}/decisions", submission["content_digest"], decisions)
    assert statuses == [201, 409]
    assert len(server.call("GET", path, "auditor")[1]["decisions"]) == 1


def test_of_two_who_confirm_a_change_at_once_one_wins(server: Server, submission: Body) -> None:
    wider = (
        plant.LOOP | {"tag": submission["loop"]["tag"]} | {"pv": {"low": 0.0, "high": 200.0, "unit": "°C"}}
    )
    loop = f"/v1/loops/{submission['loop_id']}"
    proposal = {"revision": 1, "reason": "Ranged anew.", "loop": wider}
    _, change = server.post(f"{loop}/changes", "submitter", proposal)
    path = f"/v1/changes/{change['id']}/decisions"
    assert at_once(server, path, change["content_digest"], ("confirm", "confirm")) == [201, 409]
    assert server.call("GET", loop, "auditor")[1]["revision"] == 2


def test_a_submission_that_is_sent_twice_at_once_under_one_key_is_one_record(
    server: Server, submission: Body
) -> None:
    tag = submission["loop"]["tag"]
    gains = plant.SUBMISSION | {"loop": plant.SUBMISSION["loop"] | {"tag": tag}}
    start = Barrier(2)

    def send(_number: int) -> tuple[int, Any]:
        start.wait()
        return server.post("/v1/submissions", "submitter", gains, **{"Idempotency-Key": "one"})

    with ThreadPoolExecutor(2) as pool:
        first, second = pool.map(send, range(2))
    assert (first[0], second[0]) == (201, 201)
    assert first[1] == second[1]
    assert len(server.call("GET", f"/v1/submissions?tag={tag}", "auditor")[1]["items"]) == 2
