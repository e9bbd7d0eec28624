"""Bringing a store to the current schema.

Alembic is configured here, in code; no file of settings is read.
"""

from __future__ import annotations

from datetime import datetime

from sqlalchemy.orm import Session


def migrate(url: str, *, now: datetime, demonstration: bool = False) -> None:
    """Bring the store at `url` to the current schema and begin its history where it has none.

    `demonstration` is said in the first entry of a new store, for good.
    """
    raise NotImplementedError


def is_current(session: Session) -> bool:
    """Say whether the store is at the schema of this version of the service."""
    raise NotImplementedError
