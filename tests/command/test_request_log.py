"""The log of a running service: one line a request, and none of what was sent in it."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
import uuid
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from urllib.parse import urlencode
from urllib.request import HTTPErrorProcessor, Request, build_opener

import pytest

from service.records import migrating
from service.records.database import Database, system_clock
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, add_account, password_of

FIELDS = {
    *("time", "level", "logger", "message"),
    *("request_id", "account", "method", "route", "status", "duration_ms", "problem"),
}


class _AnyStatus(HTTPErrorProcessor):
    """Every answer is an answer, a refusal or a redirect too."""

    def http_response(self, request: Any, response: Any) -> Any:
        return response


@dataclass
class Served:
    """A service with its log in a file; whatever is sent is noted, to be looked for there."""

    address: str
    process: subprocess.Popen[str]
    log: Path
    token: str
    sent: list[str] = field(default_factory=list)

    def call(
        self, method: str, path: str, body: str | None = None, **headers: str
    ) -> tuple[int, dict[str, str], str]:
        self.sent += [*headers.values(), *([body] if body else [])]
        request = Request(  # noqa: S310  the service of this test
            self.address + path,
            method=method,
            data=body.encode() if body else None,
            headers={name.replace("_", "-"): text for name, text in headers.items()},
        )
        with build_opener(_AnyStatus).open(request, timeout=20) as answer:
            return answer.status, dict(answer.headers), answer.read().decode()

    def ended(self) -> list[dict[str, Any]]:
        """End the service; return the lines of requests."""
        self.process.send_signal(signal.SIGTERM)
        assert self.process.wait(timeout=20) == 0
        lines = [json.loads(line) for line in self.log.read_text("utf-8").splitlines()]
        return [line for line in lines if line["logger"] == "service.requests"]


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Served]:
    url = f"sqlite:///{tmp_path / 'store.db'}"
    migrating.migrate(url, now=system_clock())
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        token = add_account(session, database, "submitter")
    database.close()
    environment = {
        "GAIN_SIGNOFF_DATABASE_URL": url,
        "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY,
        "PYTHONDONTWRITEBYTECODE": "1",
        "PYTHONUNBUFFERED": "1",
    }
    command = [sys.executable, "-m", "service.command", "serve", "--port", "0"]
    with (tmp_path / "log").open("w") as log:
        process = subprocess.Popen(command, env=environment, stdout=subprocess.PIPE, stderr=log, text=True)
    try:
        assert process.stdout is not None
        address = process.stdout.readline().removeprefix("Serving at ").strip()
        assert address, (tmp_path / "log").read_text()
        yield Served(address, process, tmp_path / "log", token)
    finally:
        process.kill()
        process.communicate()


def test_every_request_is_one_line_with_its_identifier_and_nothing_that_was_sent(served: Served) -> None:
    bearer = f"Bearer {served.token}"
    identifiers = []

    def call(method: str, path: str, body: str | None = None, **headers: str) -> dict[str, str]:
        _, answered, _ = served.call(method, path, body, **headers)
        identifiers.append(answered["X-Request-Id"])
        return answered

    json_body = {"Content_Type": "application/json"}
    form_body = {"Content_Type": "application/x-www-form-urlencoded"}
    call("POST", "/v1/loops", json.dumps(plant.LOOP), Authorization=bearer, **json_body)
    call("POST", "/v1/loops", '{"site": "Hidden site"}', Authorization=bearer, **json_body)
    call("GET", "/v1/loops?tag=TIC-204", Authorization=bearer, X_Request_Id="chosen-by-the-caller")
    call("GET", "/v1/loops/hidden-loop", Authorization=f"Bearer {'f' * 60}")
    call("GET", "/hidden-path?password=hidden")
    call("BREW", "/v1/loops")
    form = urlencode({"name": "submitter", "password": password_of("submitter")})
    call("POST", "/sign-in", form, Cookie="gain_signoff_session=hidden-cookie", **form_body)

    lines = served.ended()
    assert [set(line) for line in lines] == [FIELDS] * len(identifiers)
    assert [line["request_id"] for line in lines] == identifiers
    assert all(str(uuid.UUID(identifier)) == identifier for identifier in identifiers)
    seen = [tuple(line[n] for n in ("account", "method", "route", "status", "problem")) for line in lines]
    assert seen == [
        ("submitter", "POST", "/v1/loops", 201, None),
        ("submitter", "POST", "/v1/loops", 422, "invalid-fields"),
        ("submitter", "GET", "/v1/loops", 200, None),
        (None, "GET", "/v1/loops/<loop_id>", 401, "unauthenticated"),
        (None, "GET", "none", 404, None),
        (None, "other", "none", 405, "method-not-allowed"),
        # without the token of the form it is forged
        (None, "POST", "/sign-in", 403, None),
    ]
    assert all(0 < line["duration_ms"] < 20_000 for line in lines)
    log = served.log.read_text()
    assert [text for text in served.sent if text in log and text not in json_body.values()] == []
    for hidden in ("idden", "chosen", "TIC-204", served.token, password_of("submitter"), "name="):
        assert hidden not in log
