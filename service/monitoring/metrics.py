"""What this process counts and times, as Prometheus has it. Labels have few values, none of them a name."""

from __future__ import annotations

from prometheus_client import CollectorRegistry, Counter, Histogram, disable_created_metrics

# the time at which each series began, as a series of its own: twice as many, and nobody asks for it
disable_created_metrics()  # type: ignore[no-untyped-call]  # the library gives it no types

REGISTRY = CollectorRegistry()
"""Of our own: the library's default one also tells of the machine."""

REQUESTS = Counter(
    "gain_signoff_requests",
    "Requests answered.",
    ("method", "route", "status"),
    registry=REGISTRY,
)
REQUEST_SECONDS = Histogram(
    "gain_signoff_request_duration_seconds",
    "Time from reading a request to its answer; waiting for a free thread is not counted.",
    ("method", "route"),
    buckets=(0.005, 0.01, 0.025, 0.05, 0.1, 0.25, 0.5, 1, 2.5, 5, 10),
    registry=REGISTRY,
)
SIGN_IN_FAILURES = Counter(
    "gain_signoff_sign_in_failures",
    "Sign-ins on the page that were refused: the password did not belong to the name, or it was too soon.",
    ("reason",),
    registry=REGISTRY,
)
for _reason in ("wrong", "too_soon"):
    SIGN_IN_FAILURES.labels(_reason)  # 0 is told too
RECOMPUTATION_SECONDS = Histogram(
    "gain_signoff_recomputation_duration_seconds",
    "Time of one recomputation of a set of gains with a model.",
    buckets=(0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10),
    registry=REGISTRY,
)
