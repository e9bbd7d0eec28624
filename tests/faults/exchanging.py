"""One request and its answer over a connection of its own, with headers and bytes just as they are given."""

from __future__ import annotations

import contextlib
import http.client
import io
import socket
from collections.abc import Mapping

from tests.faults.conformance import Answer

ANSWER_S_MAX = 60.0
NO_ANSWER = Answer(0, {}, b"")
"""The other side closed the connection without a word, or said none in time."""


def exchange(
    port: int,
    method: str,
    path: str,
    body: bytes | None,
    headers: Mapping[str, str],
    timeout_s: float = ANSWER_S_MAX,
) -> Answer:
    """Send one request to a port of this machine; return the answer, `NO_ANSWER` where there is none."""
    connection = http.client.HTTPConnection("127.0.0.1", port, timeout=timeout_s)
    try:
        connection.putrequest(method, path, skip_host="Host" in headers, skip_accept_encoding=True)
        for name, value in headers.items():
            connection.putheader(name, value.encode())
        if body is not None and "Content-Length" not in headers:
            connection.putheader("Content-Length", str(len(body)))
        with contextlib.suppress(BrokenPipeError, ConnectionResetError):
            # an answer may come before all of a long body is sent
            connection.endheaders(body)
        return _read(connection.getresponse())
    except (OSError, http.client.HTTPException):
        return NO_ANSWER
    finally:
        connection.close()


def exchange_raw(port: int, raw: bytes, timeout_s: float = ANSWER_S_MAX) -> Answer:
    """Send these bytes and nothing more; return the first answer, `NO_ANSWER` where there is none."""
    with socket.create_connection(("127.0.0.1", port), timeout=timeout_s) as connection:
        # the other side may have answered and left before all was sent
        with contextlib.suppress(OSError):
            connection.sendall(raw)
            connection.shutdown(socket.SHUT_WR)
        received = b""
        with contextlib.suppress(OSError):
            while part := connection.recv(65_536):
                received += part
    return told_by(received)


def told_by(received: bytes) -> Answer:
    """The answer that some bytes are, after an interim one."""
    if received.startswith(b"HTTP/1.1 100"):
        received = received.partition(b"\r\n\r\n")[2]
    if not received:
        return NO_ANSWER
    response = http.client.HTTPResponse(_Received(received))  # type: ignore[arg-type]
    response.begin()
    return _read(response)


class _Received:
    """What `http.client` asks of a socket, over bytes that are there already."""

    def __init__(self, received: bytes) -> None:
        self._received = received

    def makefile(self, _mode: str) -> io.BytesIO:
        return io.BytesIO(self._received)


def _read(response: http.client.HTTPResponse) -> Answer:
    headers: dict[str, str] = {}
    for name, value in response.getheaders():
        key = name.lower()
        headers[key] = f"{headers[key]}, {value}" if key in headers else value
    return Answer(response.status, headers, response.read())
