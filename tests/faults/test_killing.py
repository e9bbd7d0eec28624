"""A few cycles with every test run; DEVELOPERS.md says how to start hundreds."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.clusters import Cluster
from tests.faults.killing import Figures, on_postgresql, on_sqlite

CYCLES = {"sqlite": 2, "postgresql": 3}


@pytest.fixture
def durable_cluster() -> Iterator[Cluster]:
    cluster = Cluster(durable=True)
    yield cluster
    cluster.remove()


def _nothing_was_lost(figures: Figures, cycles: int) -> None:
    assert figures.cycles == cycles
    assert figures.acknowledged > 0
    assert (figures.lost, figures.duplicates) == (0, 0)


def test_a_killed_service_loses_nothing_it_acknowledged(tmp_path: Path) -> None:
    _nothing_was_lost(on_sqlite(tmp_path, seed=1).go(CYCLES["sqlite"]), CYCLES["sqlite"])


def test_a_killed_service_or_server_loses_nothing_that_was_acknowledged(durable_cluster: Cluster) -> None:
    # this seed begins with deaths of both kinds
    figures = on_postgresql(durable_cluster, seed=16).go(CYCLES["postgresql"])
    _nothing_was_lost(figures, CYCLES["postgresql"])
    assert figures.service_killed > 0
    assert figures.database_stopped > 0
