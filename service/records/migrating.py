"""Bringing a store to the current schema. Alembic is configured here, in code.

The scripts lie in `migrations/` beside the package in a source tree, and inside it in an installed one.
"""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from datetime import datetime
from pathlib import Path
from typing import Any

from alembic import command
from alembic.config import Config
from alembic.operations.ops import MigrationScript
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection, make_url
from sqlalchemy.orm import Session

from service.records import grants, history
from service.records.database import migrating_engine


def scripts_folder() -> Path:
    """Return the folder of the migration scripts, installed or in the source tree."""
    installed = Path(__file__).with_name("migrations")
    return installed if installed.is_dir() else Path(__file__).parents[2] / "migrations"


def migrate(url: str, *, now: datetime, demonstration: bool = False, service_role: str | None = None) -> None:
    """Bring the store at `url` to the current schema and begin its history where it has none.

    `demonstration` is said in the first entry of a new store, for good. `service_role` is given the service's
    rights (`service.records.grants`); a role that has them keeps them. Raises StoreNotUsable.
    """
    _keep_to_its_owner(url)
    with open_for_migration(url) as connection:
        config = _config()
        config.attributes["connection"] = connection
        command.upgrade(config, "head")
        with Session(connection, autoflush=False) as session:
            history.begin(session, demonstration=demonstration, now=now)
            session.flush()
        grants.grant_again(connection)
        if service_role is not None:
            grants.grant(connection, service_role)


def _keep_to_its_owner(url: str) -> None:
    # SQLite would make the file readable by all, with the hashes of passwords in it; its companions follow it
    parts = make_url(url)
    file = parts.database or ""
    if parts.get_backend_name() == "sqlite" and file and not file.startswith((":memory:", "file:")):
        # where it cannot be made, SQLite says so in its own words
        with suppress(OSError):
            os.close(os.open(file, os.O_RDWR | os.O_CREAT, 0o600))


def is_current(session: Session) -> bool:
    """Say whether the store is at the schema of this version of the service."""
    present = MigrationContext.configure(session.connection()).get_current_heads()
    return set(present) == set(ScriptDirectory.from_config(_config()).get_heads())


@contextmanager
def open_for_migration(url: str) -> Iterator[Connection]:
    """Open a connection whose one transaction holds the whole migration."""
    engine = migrating_engine(url)
    try:
        with engine.begin() as connection:
            yield connection
    finally:
        engine.dispose()


def naming_by_date(today: datetime) -> Callable[[Any, Any, list[MigrationScript]], None]:
    """Name a new migration by its date and subject, in place of a random number."""

    def name(_context: Any, _revision: Any, scripts: list[MigrationScript]) -> None:
        for script in scripts:
            subject = re.sub(r"[^a-z0-9]+", "_", (script.message or "").lower()).strip("_")
            script.rev_id = f"{today:%Y_%m_%d}_{subject}"

    return name


def _config() -> Config:
    config = Config()
    config.set_main_option("script_location", str(scripts_folder()).replace("%", "%%"))
    return config
