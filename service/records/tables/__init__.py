"""The tables, as SQLite and PostgreSQL share them.

Lives here: mapped classes, a module a subject, and their column types. May import: sqlalchemy. Must never
know: what the rows mean to anyone; that is in the modules beside this package.

Three kinds of table: the history; kept tables, whose rows are inserted once, each with the entry of the
history that vouches for it; and working tables (accounts, tokens, sessions, throttles, idempotency keys),
which change.
"""

from __future__ import annotations

from sqlalchemy import MetaData

from service.records.tables import accounts, history, loops, submissions
from service.records.tables.columns import Base

SUBJECTS = (history, accounts, loops, submissions)
"""Every module of tables; importing them is what fills the collection."""


def metadata() -> MetaData:
    """Return the one collection of all tables."""
    return Base.metadata
