"""Copying a SQLite store whole, also while the service writes to it.

The copy is made by SQLite's backup interface: it is the store as it was at one moment, however many writers
there are. Copying the file by other means may miss what still stands in the file beside it (`-wal`).
"""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing
from pathlib import Path

from service.records.errors import StoreNotUsable

BUSY_S_MAX = 30.0
READABLE_BY_ITS_OWNER = 0o600


def copy(source: Path, target: Path) -> None:
    """Make `target`, a file that is not there yet, a copy of the store in the file `source`.

    It has its name only when it is whole and has reached the disk; nobody but its owner may read it.
    Raises StoreNotUsable.
    """
    if target.exists():
        raise StoreNotUsable(f"{target} is there already; nothing is written over it")
    unfinished = target.with_name(f"{target.name}.unfinished")
    try:
        # made first: the database driver would make it readable by all
        os.close(os.open(unfinished, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, READABLE_BY_ITS_OWNER))
        _copy_pages(source, unfinished)
        _reach_the_disk(unfinished)
        # a link fails where somebody else made the file meanwhile; a rename would replace it
        os.link(unfinished, target)
        _reach_the_disk(target.parent)
    except (OSError, sqlite3.Error) as failed:
        raise StoreNotUsable(f"{source} cannot be copied to {target}: {failed}") from None
    finally:
        unfinished.unlink(missing_ok=True)


def _copy_pages(source: Path, target: Path) -> None:
    address = f"{source.absolute().as_uri()}?mode=ro"
    with (
        closing(sqlite3.connect(address, uri=True, timeout=BUSY_S_MAX)) as read,
        closing(sqlite3.connect(target, timeout=BUSY_S_MAX)) as written,
    ):
        read.backup(written)
        # one file, with nothing beside it that could be forgotten
        written.execute("PRAGMA journal_mode = DELETE")
        (state,) = written.execute("PRAGMA integrity_check(1)").fetchone()
        if state != "ok":
            raise sqlite3.DatabaseError(str(state))


def _reach_the_disk(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
