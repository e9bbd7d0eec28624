"""One line of the log and one count for each request: who, what kind of request, how it ended, how long.

The address stands as its template, such as /v1/loops/<loop_id>, never as it was sent: a query, a tag or an
identifier has no place in a log that others read. No header and no body is looked at.
"""

from __future__ import annotations

import logging
import time

from flask import Flask, Response, g, request

from service.context import account, problem, request_id
from service.monitoring.metrics import REQUEST_SECONDS, REQUESTS

LOG = logging.getLogger("service.requests")

METHODS = frozenset({"GET", "HEAD", "POST", "PUT", "PATCH", "DELETE", "OPTIONS"})
OTHER_METHOD = "other"
NO_ROUTE = "none"
"""The template of an address at which nothing stands."""


def attach(app: Flask) -> None:
    """Log and count every request of the application.

    The application has no other step before its requests, so that the time begins here.
    """
    app.before_request(_begin)
    app.after_request(_end)


def _begin() -> None:
    g.begun_s = time.perf_counter()


def _end(response: Response) -> Response:
    # no time where the framework itself refused before anything ran
    seconds = time.perf_counter() - g.get("begun_s", time.perf_counter())
    method = request.method if request.method in METHODS else OTHER_METHOD
    route = request.url_rule.rule if request.url_rule else NO_ROUTE
    REQUESTS.labels(method, route, str(response.status_code)).inc()
    REQUEST_SECONDS.labels(method, route).observe(seconds)
    LOG.info(
        "request",
        extra={
            "request_id": request_id(),
            "account": account(),
            "method": method,
            "route": route,
            "status": response.status_code,
            "duration_ms": round(seconds * 1000, 1),
            "problem": problem(),
        },
    )
    return response
