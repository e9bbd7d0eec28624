"""The figures of a running service for Prometheus, at an address of their own that no proxy passes on."""

from __future__ import annotations

import logging
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import get_args

from prometheus_client import CollectorRegistry, start_http_server
from prometheus_client.core import CounterMetricFamily, GaugeMetricFamily
from prometheus_client.metrics_core import Metric
from prometheus_client.registry import Collector
from sqlalchemy.exc import SQLAlchemyError

from service.analysis.results import Verdict
from service.command.errors import UserMistake
from service.monitoring.metrics import REGISTRY
from service.records.database import Database
from service.records.standing import NO_MODEL, Standing, standing

LOG = logging.getLogger("service.metrics")


class OfTheStore(Collector):
    """What the store adds up to, read at each scrape: true after a restart, and alike from every process."""

    def __init__(self, database: Database) -> None:
        self._database = database

    def describe(self) -> Iterable[Metric]:
        """Nothing: asked for its names, a collector would otherwise have to read the store."""
        return ()

    def collect(self) -> Iterator[Metric]:
        """Read the store; where it cannot be reached, say that alone."""
        now = self._database.now()
        try:
            with self._database.reading() as session:
                found = standing(session, now)
        except SQLAlchemyError:
            LOG.warning("the store could not be read for the metrics", exc_info=True)
            yield _gauge("gain_signoff_store_reachable", "1 where the store could be read.", 0)
            return
        yield _gauge("gain_signoff_store_reachable", "1 where the store could be read.", 1)
        yield _submissions(found)
        yield _gauge("gain_signoff_history_entries", "Entries in the history.", found.entries)
        yield _gauge(
            "gain_signoff_emergency_reviews_overdue",
            "Emergency changes whose review is still owed past its time.",
            found.overdue_emergency_reviews,
        )
        if found.last_entry_at is not None:
            behind_s = max(0.0, (found.last_entry_at - now).total_seconds())
            yield _gauge("gain_signoff_clock_behind_seconds", "Clock behind the last entry.", behind_s)


@contextmanager
def served(database: Database, host: str, port: int) -> Iterator[int]:
    """Serve the figures at /metrics while the block runs; gives the port. Raises UserMistake."""
    registry = CollectorRegistry()
    registry.register(REGISTRY)
    registry.register(OfTheStore(database))
    try:
        server, thread = start_http_server(port, host, registry)
    except OSError as refused:
        reason = (refused.strerror or str(refused)).partition(" (")[0]
        raise UserMistake(f"cannot serve metrics at {host}:{port}: {reason}") from None
    try:
        yield server.server_port
    finally:
        server.shutdown()
        server.server_close()
        thread.join()


def _submissions(found: Standing) -> CounterMetricFamily:
    family = CounterMetricFamily(
        "gain_signoff_submissions", "Submissions kept, by verdict.", labels=["verdict"]
    )
    for verdict in (*get_args(Verdict), NO_MODEL):
        family.add_metric([verdict], found.submissions.get(verdict, 0))
    return family


def _gauge(name: str, meaning: str, value: float) -> GaugeMetricFamily:
    return GaugeMetricFamily(name, meaning, value=value)
