"""A short race with every test run; DEVELOPERS.md says how to start one of 10,000 appends."""

from __future__ import annotations

from tests.databases import Databases
from tests.faults.racing import race


def test_sixteen_writers_at_once_make_no_fork_and_no_gap(databases: Databases) -> None:
    url = databases.new()
    assert race(url, appends=320) > 0
    databases.drop(url)
