"""A store made by the migrations once, and copied for each test."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest

from service.records import migrating
from service.records.views import LoopView
from tests.records.store import START, Store


@pytest.fixture(scope="session")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store of a demonstration, so that it takes a clock that the tests move, with people and nothing
    else.
    """
    file = tmp_path_factory.mktemp("records") / "made.db"
    migrating.migrate(f"sqlite:///{file}", now=START, demonstration=True)
    store = Store(f"sqlite:///{file}")
    store.add_people()
    store.database.close()
    return file


@pytest.fixture
def store(made: Path, tmp_path: Path) -> Iterator[Store]:
    copy = tmp_path / "store.db"
    shutil.copy(made, copy)
    store = Store(f"sqlite:///{copy}")
    yield store
    store.database.close()


@pytest.fixture
def loop(store: Store) -> LoopView:
    """A loop with a model at one operating point."""
    loop = store.register()
    store.add_model(loop)
    return loop
