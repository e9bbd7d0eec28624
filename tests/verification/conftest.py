"""A store with something in every kept table, and the means to tamper with it as its owner could."""

from __future__ import annotations

import shutil
import sqlite3
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from service.records import kept_sheets, migrating
from service.verification.report import Report
from service.verification.verifier import Checkpoint, verify
from tests.records.store import START, Store, gains


@dataclass(frozen=True)
class Owned:
    """A store's file in the hands of somebody who may do anything to it."""

    file: Path

    @property
    def url(self) -> str:
        return f"sqlite:///{self.file}"

    def verify(self, checkpoint: Checkpoint | None = None) -> Report:
        return verify(self.url, checkpoint=checkpoint)

    def execute(self, *statements: str | tuple[str, tuple[Any, ...]]) -> None:
        """Run statements with every trigger dropped and no constraint checked that can be left out."""
        connection = sqlite3.connect(self.file, isolation_level=None)
        names = connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for (name,) in names:
            connection.execute(f"DROP TRIGGER {name}")
        connection.execute("PRAGMA ignore_check_constraints = ON")
        for statement in statements:
            connection.execute(*((statement,) if isinstance(statement, str) else statement))
        connection.close()

    def rows(self, query: str, *parameters: Any) -> list[tuple[Any, ...]]:
        connection = sqlite3.connect(self.file)
        found = connection.execute(query, parameters).fetchall()
        connection.close()
        return found

    def value(self, query: str, *parameters: Any) -> Any:
        return self.rows(query, *parameters)[0][0]

    def checkpoint(self) -> Checkpoint:
        report = self.verify()
        assert report.holds
        return Checkpoint(size=report.entries, root=report.root)


@pytest.fixture(scope="session")
def lived_in(tmp_path_factory: pytest.TempPathFactory) -> Path:
    file = tmp_path_factory.mktemp("verification") / "lived_in.db"
    migrating.migrate(f"sqlite:///{file}", now=START, demonstration=True)
    store = Store(f"sqlite:///{file}")
    store.add_people()
    _live(store)
    store.database.close()
    return file


def _live(store: Store) -> None:
    loop = store.register(criteria={"gain_margin_min": 2.0})
    store.add_model(loop)
    first = store.submit(temporary_until="2026-12-31T00:00:00Z", install_by="2026-12-30T00:00:00Z")
    signed = store.approve(first)
    with store.database.writing() as session:
        reviewer = store.actor("reviewer")
        kept_sheets.keep(session, reviewer, signed.decision.decision_id, b"%PDF", "1", store.clock())
    store.clock.forward(hours=1)
    store.install(first)
    other = store.register(tag="LIC-7", area="Tank farm")
    store.add_model(other)
    second = store.submit(loop={"site": "North", "tag": "LIC-7"}, controller=gains(1.2))
    store.decide(second, "reject")
    store.submit(kind="emergency", controller=gains(1.1))


@pytest.fixture
def owned(lived_in: Path, tmp_path: Path) -> Owned:
    copy = tmp_path / "owned.db"
    shutil.copy(lived_in, copy)
    return Owned(copy)
