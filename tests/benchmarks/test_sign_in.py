"""Whether the time of a refused sign-in tells that there is such an account.

`BENCHMARK_SIGN_INS=200 pytest -n 0 -s tests/benchmarks/test_sign_in.py` prints figures worth reading; the
medians of known and unknown names are meant to differ by less than 5 ms: by the wall clock on a quiet
machine, by the processor's time on any.
"""

from __future__ import annotations

import os
import statistics
import time
from collections.abc import Callable, Iterator

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


CLOCKS: dict[str, Callable[[], float]] = {
    "processor time": time.process_time,
    "wall clock": time.perf_counter,
}
"""The wall clock is what a guesser has.

On a machine that does other work it differs between two equal tries by more than the limit. The processor's
time of this process, the threads of Argon2 included, is what the two ways cost. PostgreSQL's own is not in
it; `tests/records/test_sign_ins.py` holds the statements of the two ways to each other.
"""


def _refused(database: Database, name: str) -> dict[str, float]:
    """Try once; return what it took, in ms, by each clock."""
    began = {clock: read() for clock, read in CLOCKS.items()}
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(database, name, "not the password of anybody", SOURCE)
    lasted = {clock: 1000 * (read() - began[clock]) for clock, read in CLOCKS.items()}
    with database.writing() as session:
        for subject in (throttles.of_account(name), throttles.of_source(SOURCE)):
            throttles.forget(session, subject)
    return lasted


def test_a_refusal_takes_as_long_for_known_as_for_unknown_names(database: Database) -> None:
    lasted: dict[str, list[dict[str, float]]] = {"known": [], "unknown": []}
    # in turn, each as often first: whatever else the machine does falls on both
    for turn in range(TRIES):
        for name in ("known", "unknown") if turn % 2 else ("unknown", "known"):
            lasted[name].append(_refused(database, name))
    for clock in CLOCKS:
        known, unknown = (statistics.median(each[clock] for each in lasted[name]) for name in lasted)
        print(
            f"\n{clock}, median of {TRIES}: known {known:.1f} ms, unknown {unknown:.1f} ms,"
            f" difference {known - unknown:+.2f} ms"
        )
