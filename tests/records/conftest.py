"""A store made by the migrations once, and copied for each test."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from service.records import migrating
from service.records.views import LoopView
from tests.databases import Databases
from tests.records.store import START, Store


@pytest.fixture(scope="session")
def made(databases: Databases) -> str:
    """A store of a demonstration, so that it takes a clock that the tests move, with people and nothing
    else.
    """
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    store.add_people()
    store.database.close()
    return url


@pytest.fixture
def store(made: str, databases: Databases) -> Iterator[Store]:
    store = Store(databases.copy_of(made))
    yield store
    store.database.close()
    databases.drop(store.url)


@pytest.fixture
def loop(store: Store) -> LoopView:
    """A loop with a model at one operating point."""
    loop = store.register()
    store.add_model(loop)
    return loop
