"""What holds for every test, however pytest is started."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest

# before numpy is imported by any test: two workers on two cores, one thread each
for _variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_variable, "1")
# what Hypothesis keeps between runs stays out of the tree
os.environ.setdefault(
    "HYPOTHESIS_STORAGE_DIRECTORY", str(Path.home() / ".cache" / "gain-signoff" / "hypothesis")
)

from hypothesis import settings  # noqa: E402  the variables above come first on purpose

from tests.clusters import Cluster, in_memory  # noqa: E402
from tests.databases import Databases, PostgresqlDatabases, SqliteFiles  # noqa: E402

# No deadline for one example: the machine is shared, and a slow one is not a wrong one. The same examples in
# every normal run, so that a failure is a change of ours; HYPOTHESIS_PROFILE=new_examples tries others.
settings.register_profile("new_examples", deadline=None, print_blob=True)
settings.register_profile("house", deadline=None, print_blob=True, derandomize=True)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "house"))


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--walks", type=int, default=2000, help="Walks through the life cycle.")


@pytest.fixture(scope="session")
def cluster() -> Iterator[Cluster]:
    """A PostgreSQL server of this worker's own, started when a test first asks for it."""
    cluster = Cluster()
    yield cluster
    cluster.remove()


@pytest.fixture
def own_cluster() -> Iterator[Cluster]:
    """A server of its own, since the names of roles hold for a whole server."""
    cluster = Cluster()
    yield cluster
    cluster.remove()


@pytest.fixture(scope="session", params=["sqlite", "postgresql"])
def databases(request: pytest.FixtureRequest) -> Iterator[Databases]:
    """Where stores are made: every test that touches records runs on both kinds of database.

    In memory where there is room: a test waits longer for a disk than it computes.
    """
    if request.param == "postgresql":
        yield PostgresqlDatabases(request.getfixturevalue("cluster"))
    else:
        with tempfile.TemporaryDirectory(prefix="gain-signoff-", dir=in_memory()) as folder:
            yield SqliteFiles(Path(folder))
