"""How many entries a second `history verify` holds against their bytes and rows.

`BENCHMARK_ENTRIES=20000 pytest -n 0 -s tests/benchmarks/test_verification.py` prints figures worth reading.
"""

from __future__ import annotations

import os
import time

from service.records import loops, migrating
from service.records.roles import CONSOLE
from service.verification.verifier import verify
from tests.databases import Databases
from tests.records.store import START, Store, registration

ENTRIES = int(os.environ.get("BENCHMARK_ENTRIES", "200"))
AT_A_TIME = 200


def test_entries_verified_a_second(databases: Databases) -> None:
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    for first in range(0, ENTRIES, AT_A_TIME):
        with store.database.writing() as session:
            for number in range(first, min(first + AT_A_TIME, ENTRIES)):
                document = registration(tag=f"FIC-{number}")
                loops.register(session, CONSOLE, document, store.clock())
    store.database.close()
    began, began_cpu = time.perf_counter(), time.process_time()
    report = verify(url)
    lasted, cpu = time.perf_counter() - began, time.process_time() - began_cpu
    assert report.holds
    print(
        f"\n{databases.name}: {report.entries} entries with {report.rows} rows verified in {lasted:.2f} s,"
        f" {report.entries / lasted:.0f} a second ({report.entries / cpu:.0f} a second of its own CPU)"
    )
    databases.drop(url)
