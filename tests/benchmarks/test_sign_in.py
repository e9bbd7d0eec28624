"""Whether the time of a refused sign-in tells that there is such an account.

`BENCHMARK_SIGN_INS=200 pytest -n 0 -s tests/benchmarks/test_sign_in.py` prints figures worth reading; the
medians of known and unknown names are meant to differ by less than 5 ms.
"""

from __future__ import annotations

import os
import statistics
import time
from collections.abc import Iterator

import pytest

from service.records import accounts, migrating, sign_ins, throttles
from service.records.accounts import NewAccount
from service.records.database import Database, system_clock
from service.records.errors import NotAuthenticated
from service.records.roles import CONSOLE
from tests.databases import Databases

TRIES = int(os.environ.get("BENCHMARK_SIGN_INS", "3"))
SOURCE = "127.0.0.1"


@pytest.fixture
def database(databases: Databases) -> Iterator[Database]:
    """A store with one account, whose password is hashed at its real cost."""
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    database = Database.open(url)
    with database.writing() as session:
        new = NewAccount(name="known", full_name="Known", roles=("reviewer",), password="long enough for all")
        accounts.add(session, CONSOLE, new, database.now())
    yield database
    database.close()
    databases.drop(url)


def _refused_in_s(database: Database, name: str) -> float:
    began = time.perf_counter()
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(database, name, "not the password of anybody", SOURCE)
    lasted = time.perf_counter() - began
    with database.writing() as session:
        for subject in (throttles.of_account(name), throttles.of_source(SOURCE)):
            throttles.forget(session, subject)
    return lasted


def test_a_refusal_takes_as_long_for_known_as_for_unknown_names(database: Database) -> None:
    times: dict[str, list[float]] = {"known": [], "unknown": []}
    # in turn, so that whatever else the machine does falls on both
    for _ in range(TRIES):
        for name, lasted in times.items():
            lasted.append(_refused_in_s(database, name))
    medians = {name: 1000 * statistics.median(lasted) for name, lasted in times.items()}
    difference = medians["known"] - medians["unknown"]
    print(
        f"\nmedian of {TRIES}: known {medians['known']:.1f} ms, unknown {medians['unknown']:.1f} ms,"
        f" difference {difference:+.1f} ms"
    )
