"""A WSGI application on a socket until the process is told to end; what was begun is then finished first."""

from __future__ import annotations

import signal
import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from types import FrameType

import waitress
from flask import Flask
from waitress import wasyncore
from waitress.server import TcpWSGIServer

from service.command.errors import UserMistake
from service.documents.limits import BODY_BYTES_MAX

THREADS = 8
BODY_BYTES_BUFFERED_MAX = 4 * BODY_BYTES_MAX
"""Past this a body is not even taken in. Between the two limits the application says what is wrong."""

DRAIN_S = 30.0
"""How long requests that were begun may take after the signal, where nothing else is said.

A recomputation has a work bound far below it."""


def listen(host: str, port: int) -> socket.socket:
    """Return a socket that listens at the address; port 0 takes a free one. Raises UserMistake."""
    family = socket.AF_INET6 if ":" in host else socket.AF_INET
    try:
        return socket.create_server((host, port), family=family)
    except OSError as refused:
        reason = (refused.strerror or str(refused)).partition(" (")[0]
        raise UserMistake(f"cannot listen at {host}:{port}: {reason}; --port takes another one") from None


def serve_until_told(
    app: Flask,
    listener: socket.socket,
    on_ready: Callable[[str], None],
    *,
    drain_s: float = DRAIN_S,
    trusted_proxy: str | None = None,
) -> None:
    """Serve `app` until SIGTERM or SIGINT, then finish the requests that were begun and return.

    What is not finished after `drain_s` seconds is cut off; the records roll it back. `trusted_proxy` is the
    address of a proxy whose X-Forwarded-For says where a request comes from; from anyone else it is dropped.
    `on_ready` is called once with the address. The listener is closed at the end.
    """
    server = waitress.create_server(
        app,
        map={},
        sockets=[listener],
        threads=THREADS,
        ident=None,
        max_request_body_size=BODY_BYTES_BUFFERED_MAX,
        trusted_proxy=trusted_proxy,
        trusted_proxy_headers={"x-forwarded-for"} if trusted_proxy else set(),
        clear_untrusted_proxy_headers=True,
    )
    with _told_to_end(server) as told:
        on_ready(_address(listener))
        _loop(server, until=told.is_set)
        server.del_channel()
        listener.close()
        deadline = time.monotonic() + drain_s
        _loop(server, until=lambda: not _busy(server) or time.monotonic() > deadline)
        server.task_dispatcher.shutdown()


def _address(listener: socket.socket) -> str:
    host, port = listener.getsockname()[:2]
    return f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}"


@contextmanager
def _told_to_end(server: TcpWSGIServer) -> Iterator[threading.Event]:
    # waitress alone ends its loop at the signal and leaves answers that a worker has just written unsent
    told = threading.Event()

    def tell(_signal: int, _frame: FrameType | None) -> None:
        told.set()
        server.pull_trigger()

    before = {number: signal.signal(number, tell) for number in (signal.SIGTERM, signal.SIGINT)}
    try:
        yield told
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _loop(server: TcpWSGIServer, until: Callable[[], bool]) -> None:
    while not until():
        wasyncore.loop(timeout=0.5, use_poll=True, map=server._map, count=1)


def _busy(server: TcpWSGIServer) -> bool:
    channels = list(server.active_channels.values())
    return any(channel.requests or channel.request or channel.total_outbufs_len for channel in channels)
