"""All tables together, as migrations are held against them."""

from __future__ import annotations

from sqlalchemy import MetaData

from service.records.tables import accounts, changes, checkpoints, history, loops, submissions
from service.records.tables.columns import Base

SUBJECTS = (history, accounts, loops, submissions, changes, checkpoints)
"""Every module of tables; importing them is what fills the collection."""


def metadata() -> MetaData:
    """Return the one collection of all tables."""
    return Base.metadata
