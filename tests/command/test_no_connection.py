"""The service makes no connection of its own to anywhere, whatever it is asked to do.

The interpreter reports every connection, every look-up of a name and every datagram before it happens
(PEP 578, audit events), so that nothing written in Python gets past. The running service is a real one; the
hook lies in a `sitecustomize` of its own.
"""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
from http.cookiejar import CookieJar
from pathlib import Path
from urllib.parse import urlencode
from urllib.request import HTTPCookieProcessor, Request, build_opener

import pytest

from service.records import migrating
from service.records.database import Database, system_clock
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, add_account, password_of
from tests.pages import markup

HOOK = """
import ipaddress, os, sys

def watch(event, arguments):
    if event in ("socket.connect", "socket.sendto", "socket.sendmsg"):
        address = arguments[1]
        # a text is the path of a socket on this machine, which leads nowhere else
        harmless = not isinstance(address, tuple) or is_loopback(address[0])
        host = address[0]
    elif event in ("socket.getaddrinfo", "socket.gethostbyname", "socket.gethostbyaddr"):
        host = arguments[0]
        # nobody is asked for the address of an address
        harmless = host in (None, "", "localhost") or is_number(host)
    else:
        return
    if harmless:
        return
    with open(os.environ["WATCHED"], "a") as found:
        found.write(f"{event} {host}\\n")
    raise PermissionError(f"{event} to {host}")

def is_loopback(host):
    return is_number(host) and ipaddress.ip_address(host).is_loopback

def is_number(host):
    try:
        return bool(ipaddress.ip_address(host))
    except ValueError:
        return False

sys.addaudithook(watch)
"""


@pytest.fixture
def watched(tmp_path: Path) -> dict[str, str]:
    """An environment in which every Python refuses to reach out, and notes that it was asked to."""
    (tmp_path / "sitecustomize.py").write_text(HOOK)
    return os.environ | {
        "PYTHONPATH": f"{tmp_path}:{Path(__file__).parents[2]}",
        "PYTHONDONTWRITEBYTECODE": "1",
        "PYTHONUNBUFFERED": "1",
        "WATCHED": str(tmp_path / "found"),
    }


def test_the_hook_sees_whoever_reaches_out(watched: dict[str, str]) -> None:
    # an address for documentation only (RFC 5737), and a name that nobody has (RFC 2606)
    tries = (
        "import socket; socket.socket().connect(('192.0.2.1', 80))",
        "import socket; socket.getaddrinfo('service.invalid', 80)",
    )
    for code in tries:
        ended = subprocess.run([sys.executable, "-c", code], env=watched, capture_output=True, check=False)
        assert b"PermissionError" in ended.stderr
    found = Path(watched["WATCHED"]).read_text()
    assert found == "socket.connect 192.0.2.1\nsocket.getaddrinfo service.invalid\n"


def test_nothing_is_reached_from_start_to_end_with_a_sign_in_a_signature_and_a_sheet(
    watched: dict[str, str], tmp_path: Path
) -> None:
    url = f"sqlite:///{tmp_path / 'store.db'}"
    migrating.migrate(url, now=system_clock())
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        tokens = {name: add_account(session, database, name) for name in ("submitter", "reviewer")}
    database.close()
    settings = {"GAIN_SIGNOFF_DATABASE_URL": url, "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY}
    command = [sys.executable, "-m", "service.command", "serve", "--port", "0", "--metrics-port", "0"]
    process = subprocess.Popen(
        command, env=watched | settings, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    try:
        assert process.stderr is not None
        assert process.stdout is not None
        metrics_port = re.findall(r"port (\d+) of", process.stderr.readline())[0]
        address = process.stdout.readline().removeprefix("Serving at ").strip()
        for path in ("/livez", "/readyz", "/v1/openapi.json", "/reference"):
            read(address + path)
        submit_sign_and_print(address, tokens)
        sign_in(address)
        assert b"gain_signoff_requests_total" in read(f"http://127.0.0.1:{metrics_port}/metrics")
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=30) == 0
    finally:
        process.kill()
        process.communicate()
    assert not Path(watched["WATCHED"]).exists(), Path(watched["WATCHED"]).read_text()


def read(address: str, token: str | None = None, body: object = None) -> bytes:
    headers = {"Authorization": f"Bearer {token}"} if token else {}
    headers |= {"Content-Type": "application/json"} if body is not None else {}
    sent = None if body is None else json.dumps(body).encode()
    request = Request(address, data=sent, headers=headers)  # noqa: S310  the service of this test
    with build_opener().open(request, timeout=60) as answer:
        return bytes(answer.read())


def submit_sign_and_print(address: str, tokens: dict[str, str]) -> None:
    author, reviewer = tokens["submitter"], tokens["reviewer"]
    loop = json.loads(read(f"{address}/v1/loops", author, plant.LOOP))["id"]
    read(f"{address}/v1/loops/{loop}/models", author, plant.MODEL)
    made = json.loads(read(f"{address}/v1/submissions", author, plant.SUBMISSION))
    decision = {
        "decision": "approve",
        "reason": "read against the limits",
        "content_digest": made["content_digest"],
        "password": password_of("reviewer"),
    }
    read(f"{address}/v1/submissions/{made['id']}/decisions", reviewer, decision)
    assert read(f"{address}/v1/submissions/{made['id']}/sheet.pdf", author).startswith(b"%PDF")


def sign_in(address: str) -> None:
    browser = build_opener(HTTPCookieProcessor(CookieJar()))
    with browser.open(f"{address}/sign-in", timeout=20) as answer:
        page = markup.read(answer.read().decode())
    form = page.one("form", action="/sign-in")
    fields = {field.get("name"): field.get("value") for field in form.all("input")}
    fields |= {"name": "reviewer", "password": password_of("reviewer")}
    request = Request(  # noqa: S310  the service of this test
        f"{address}/sign-in", data=urlencode(fields).encode(), headers={"Origin": address}
    )
    with browser.open(request, timeout=20) as answer:
        assert "What awaits review" in answer.read().decode()
