"""The service as a process of its own on loopback: it answers, drains, and says why it does not start."""

from __future__ import annotations

import http.client
import json
import os
import re
import select
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from urllib.parse import urlencode, urlsplit

import pytest

from service.records import migrating
from service.records.database import Database, system_clock
from tests.api import plant
from tests.api.conftest import CHEAP, add_account
from tests.databases import opened, run

SECRET_KEY = "a secret of the tests, of 32 bytes or more"
COMMAND = (sys.executable, "-m", "service.command", "serve", "--port", "0")


@pytest.fixture
def environment(tmp_path: Path) -> dict[str, str]:
    url = f"sqlite:///{tmp_path / 'store.db'}"
    migrating.migrate(url, now=system_clock())
    settings = {"GAIN_SIGNOFF_DATABASE_URL": url, "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY}
    return os.environ | settings | {"PYTHONUNBUFFERED": "1", "PYTHONDONTWRITEBYTECODE": "1"}


@contextmanager
def serving(environment: dict[str, str], *options: str) -> Iterator[tuple[subprocess.Popen[str], str, int]]:
    """Start the service; give its process, host and port; end it if the test has not."""
    process = subprocess.Popen(
        (*COMMAND, *options), env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    try:
        assert process.stdout is not None
        said = process.stdout.readline()
        address = urlsplit(said.removeprefix("Serving at ").strip())
        assert address.hostname, process.stderr and process.stderr.read()
        yield process, address.hostname, address.port or 0
    finally:
        process.kill()
        process.communicate()


def answer(host: str, port: int, path: str) -> tuple[int, http.client.HTTPMessage]:
    connection = http.client.HTTPConnection(host, port, timeout=20)
    connection.request("GET", path)
    response = connection.getresponse()
    response.read()
    connection.close()
    return response.status, response.headers


def test_the_service_answers_and_says_nothing_of_what_it_is_made_of(environment: dict[str, str]) -> None:
    with serving(environment) as (_, host, port):
        assert host == "127.0.0.1"
        assert answer(host, port, "/livez")[0] == 200
        assert answer(host, port, "/readyz")[0] == 200
        status, headers = answer(host, port, "/v1/loops")
        assert status == 401
        assert "Server" not in headers or "waitress" not in headers["Server"].lower()


def test_at_sigterm_a_request_that_was_begun_is_finished_and_no_other_is_taken(
    environment: dict[str, str],
) -> None:
    with serving(environment) as (process, host, port):
        begun = socket.create_connection((host, port), timeout=20)
        begun.sendall(b"POST /v1/recomputations HTTP/1.1\r\nHost: x\r\nContent-Length: 4\r\n\r\nab")
        time.sleep(0.3)
        process.send_signal(signal.SIGTERM)
        time.sleep(0.7)
        with pytest.raises(ConnectionRefusedError):
            socket.create_connection((host, port), timeout=5)
        begun.sendall(b"cd")
        assert begun.recv(100).startswith(b"HTTP/1.1 401 ")
        begun.close()
        assert process.wait(timeout=20) == 0


def test_at_sigterm_what_is_being_computed_is_answered_whole(environment: dict[str, str]) -> None:
    database = Database.open(environment["GAIN_SIGNOFF_DATABASE_URL"], password_hasher=CHEAP)
    with database.writing() as session:
        token = add_account(session, database, "submitter")
    database.close()
    headers = {"Authorization": f"Bearer {token}", "Content-Type": "application/json"}
    # the second opinion is imported at its first use, which takes a second: the signal comes amid it
    body = json.dumps(plant.RECOMPUTATION | {"include": ["curves", "second_opinion"]})
    with serving(environment) as (process, host, port):
        connection = http.client.HTTPConnection(host, port, timeout=60)
        connection.request("POST", "/v1/recomputations", body, headers)
        time.sleep(0.3)
        assert select.select([connection.sock], [], [], 0)[0] == [], "it is answered already"
        process.send_signal(signal.SIGTERM)
        answered = connection.getresponse()
        assert answered.status == 200
        assert json.loads(answered.read())["verdict"] == "stable"
        connection.close()
        assert process.wait(timeout=20) == 0


def test_at_sigterm_an_idle_connection_holds_nothing_up(environment: dict[str, str]) -> None:
    with serving(environment) as (process, host, port):
        idle = http.client.HTTPConnection(host, port, timeout=20)
        idle.request("GET", "/livez")
        idle.getresponse().read()
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=10) == 0
        idle.close()


def test_a_request_that_does_not_end_is_cut_off_after_the_time_given(environment: dict[str, str]) -> None:
    with serving(environment, "--drain", "0.5") as (process, host, port):
        stuck = socket.create_connection((host, port), timeout=20)
        stuck.sendall(b"POST /v1/recomputations HTTP/1.1\r\nHost: x\r\nContent-Length: 4\r\n\r\nab")
        time.sleep(0.3)
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=10) == 0
        stuck.close()


@pytest.mark.parametrize(
    ("options", "counted"),
    [
        ((), "source:127.0.0.1"),
        (("--trusted-proxy", "127.0.0.1"), "source:192.0.2.7"),
        (("--trusted-proxy", "192.0.2.1"), "source:127.0.0.1"),
    ],
    ids=["no proxy", "the proxy", "another one"],
)
def test_a_failed_sign_in_counts_where_it_comes_from_and_only_the_proxy_may_say_so(
    environment: dict[str, str], options: tuple[str, ...], counted: str
) -> None:
    with serving(environment, *options) as (_, host, port):
        connection = http.client.HTTPConnection(host, port, timeout=20)
        connection.request("GET", "/sign-in")
        answered = connection.getresponse()
        (token,) = re.findall(r'name="token" value="([^"]+)"', answered.read().decode())
        headers = {
            "Cookie": (answered.headers["Set-Cookie"] or "").partition(";")[0],
            "Content-Type": "application/x-www-form-urlencoded",
            "X-Forwarded-For": "192.0.2.7",
        }
        typed = urlencode({"token": token, "name": "nobody", "password": "wrong"})
        connection.request("POST", "/sign-in", typed, headers)
        assert connection.getresponse().status == 401
        connection.close()
    with opened(environment["GAIN_SIGNOFF_DATABASE_URL"]) as store:
        found = [subject for (subject,) in run(store, "SELECT subject FROM throttles")]
    assert sorted(found) == ["account:nobody", counted]


def test_many_at_once_are_answered(environment: dict[str, str]) -> None:
    with serving(environment) as (_, host, port):
        statuses: list[int] = []
        threads = [
            threading.Thread(target=lambda: statuses.append(answer(host, port, "/readyz")[0]))
            for _ in range(20)
        ]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        assert statuses == [200] * 20


def refusal(environment: dict[str, str], *arguments: str) -> str:
    """Return the one sentence with which the service refuses to start."""
    process = subprocess.run(
        (*COMMAND, *arguments), env=environment, capture_output=True, text=True, timeout=60, check=False
    )
    assert process.returncode == 2
    assert process.stdout == ""
    assert process.stderr.count("\n") == 1, process.stderr
    return process.stderr


@pytest.mark.parametrize("key", ["", "too short"])
def test_it_does_not_start_without_a_secret_key(environment: dict[str, str], key: str) -> None:
    said = refusal(environment | {"GAIN_SIGNOFF_SECRET_KEY": key})
    assert "GAIN_SIGNOFF_SECRET_KEY" in said
    assert "32 bytes" in said


def test_it_does_not_start_on_a_store_that_was_never_made(
    environment: dict[str, str], tmp_path: Path
) -> None:
    said = refusal(environment | {"GAIN_SIGNOFF_DATABASE_URL": f"sqlite:///{tmp_path / 'other.db'}"})
    assert "gain-signoff migrate" in said


def test_it_does_not_start_with_a_signing_key_that_is_none(
    environment: dict[str, str], tmp_path: Path
) -> None:
    (tmp_path / "key.pem").write_text("no key")
    said = refusal(environment | {"GAIN_SIGNOFF_SIGNING_KEY_FILE": str(tmp_path / "key.pem")})
    assert "signing key file" in said


def test_everybody_is_no_proxy_to_be_trusted(environment: dict[str, str]) -> None:
    process = subprocess.run(
        (*COMMAND, "--trusted-proxy", "*"), env=environment, capture_output=True, text=True, check=False
    )
    assert process.returncode == 2
    assert "'*' is no IP address" in process.stderr


def test_it_says_when_its_port_is_taken(environment: dict[str, str]) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = taken.getsockname()[1]
        assert f"127.0.0.1:{port}" in refusal(environment, "--port", str(port))


@pytest.mark.parametrize("subject", ["serve", "demo"])
def test_a_port_that_is_taken_is_told_in_one_sentence_before_anything_is_done(
    environment: dict[str, str], subject: str
) -> None:
    store = Path(environment["GAIN_SIGNOFF_DATABASE_URL"].removeprefix("sqlite:///"))
    before = store.read_bytes()
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = str(taken.getsockname()[1])
        ended = subprocess.run(
            [*COMMAND[:-3], subject, "--port", port],
            env=environment,
            capture_output=True,
            text=True,
            timeout=60,
        )
    assert ended.returncode == 2
    assert ended.stderr.splitlines()[-1].startswith(f"Error: cannot listen at 127.0.0.1:{port}: ")
    assert "--port" in ended.stderr
    assert store.read_bytes() == before
