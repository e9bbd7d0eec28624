"""Many writers append to one history at once; no fork, no gap, nothing twice.

    python -m tests.faults.racing --database postgresql --appends 10000
    python -m tests.faults.racing --database sqlite --appends 10000

Sixteen writers: four processes with four threads each, every append a transaction of its own, as in the
service. Prints how many came through a second.
"""

from __future__ import annotations

import argparse
import collections
import json
import multiprocessing
import tempfile
import threading
import time
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from pathlib import Path

from service.records import history, migrating
from service.records.database import Database, system_clock
from service.records.roles import CONSOLE
from service.verification.verifier import verify
from tests.clusters import Cluster
from tests.databases import Databases, PostgresqlDatabases, SqliteFiles, opened, run

PROCESSES = 4
THREADS = 4
WRITERS = PROCESSES * THREADS


def race(url: str, appends: int) -> float:
    """Append by all writers together, assert that all is well, return the appends a second."""
    migrating.migrate(url, now=system_clock())
    each = appends // WRITERS
    spawn = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(PROCESSES, mp_context=spawn) as processes:
        list(processes.map(_ready, range(PROCESSES)))
        began = time.monotonic()
        failures = [
            sentence
            for found in processes.map(partial(_write, url, each), range(PROCESSES))
            for sentence in found
        ]
        lasted = time.monotonic() - began
    assert failures == []
    _check(url, each)
    return each * WRITERS / lasted


def _ready(_process: int) -> None:
    """Let a process start before the clock does."""
    time.sleep(0.2)


def _write(url: str, each: int, process: int) -> list[str]:
    """Append by the threads of one process; return what went wrong."""
    database = Database.open(url)
    failures: list[str] = []

    def write(thread: int) -> None:
        try:
            for index in range(each):
                with database.writing() as session:
                    content = {"writer": process * THREADS + thread, "index": index}
                    history.append(session, kind="race", actor=CONSOLE, content=content, now=database.now())
        except Exception as failure:
            failures.append(repr(failure))

    threads = [threading.Thread(target=write, args=(thread,)) for thread in range(THREADS)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    database.close()
    return failures


def _check(url: str, each: int) -> None:
    with opened(url) as connection:
        rows = run(connection, "SELECT number, previous, canonical FROM history_events ORDER BY number")
    assert [number for number, _, _ in rows] == list(range(1, each * WRITERS + 2)), "a gap"
    assert len({previous for _, previous, _ in rows}) == len(rows), "a fork"
    told = [json.loads(canonical)["content"] for _, _, canonical in rows[1:]]
    found = collections.Counter((content["writer"], content["index"]) for content in told)
    assert found == {(writer, index): 1 for writer in range(WRITERS) for index in range(each)}
    report = verify(url)
    assert report.holds, report.fault


def main() -> None:
    """Race and print the speed."""
    parser = argparse.ArgumentParser(description="Append to one history by sixteen writers.")
    parser.add_argument("--database", choices=("sqlite", "postgresql"), required=True)
    parser.add_argument("--appends", type=int, default=10_000)
    asked = parser.parse_args()
    if asked.database == "sqlite":
        with tempfile.TemporaryDirectory() as folder:
            _tell(SqliteFiles(Path(folder)), asked.appends)
        return
    cluster = Cluster(durable=True)
    try:
        _tell(PostgresqlDatabases(cluster), asked.appends)
    finally:
        cluster.remove()


def _tell(databases: Databases, appends: int) -> None:
    speed = race(databases.new(), appends)
    print(f"{appends} appends by {WRITERS} writers on {databases.name}: {speed:.0f}/s, no fork, no gap")


if __name__ == "__main__":
    main()
