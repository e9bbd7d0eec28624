"""Verifying a store: the chain, the digests, and every row that an entry vouches for.

Entries are read in order and each is held against its own bytes: digest, chain, searchable columns, then
the rows that were inserted with it. The first place that does not hold is named, and the reading ends
there: after a break nothing more can be said.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from contextlib import ExitStack, closing
from typing import Any

from sqlalchemy import Connection
from sqlalchemy.exc import DBAPIError, SQLAlchemyError

from service.verification import store
from service.verification.chain import Chain
from service.verification.checkpoints import Checkpoint
from service.verification.report import Broken, Fault, Report
from service.verification.store import Table

PROJECTED = ("number", "kind", "actor", "loop_id", "site", "tag", "area", "previous")
"""Columns of an entry that repeat a part of its bytes, the time aside."""

Progress = Callable[[int, int], None]
"""Called now and then with the entries verified and the entries in all."""

PROGRESS_EVERY = 1000


def verify(
    url: str,
    *,
    checkpoint: Checkpoint | None = None,
    held_key: str | None = None,
    progress: Progress | None = None,
) -> Report:
    """Verify the store at `url`, and that its history is the one the checkpoint was made of.

    `held_key` is a public key, in base64, that somebody got on another way than through the store: the
    history has to know it, and every later key has to follow on it. Reads only. A store that cannot be read
    is a fault, not an exception.
    """
    reading = _Reading(Chain(checkpoint, held_key))
    fault: Fault | None = None
    try:
        with store.opened(url) as connection, ExitStack() as open_streams:
            reading.verify(connection, open_streams, progress)
    except Broken as broken:
        fault = broken.fault
    except (DBAPIError, SQLAlchemyError) as error:
        cause = str(error.orig if isinstance(error, DBAPIError) else error)
        in_one_line = " ".join(cause.split())
        fault = Fault(entry=None, table=None, row=None, what=f"the store cannot be read: {in_one_line}")
    return reading.report(fault, checkpoint)


class _Reading:
    """How far the reading has come."""

    def __init__(self, chain: Chain) -> None:
        self.chain = chain
        self.rows = 0
        self.covered: tuple[Table, ...] = ()
        self.not_covered: tuple[str, ...] = ()

    def report(self, fault: Fault | None, checkpoint: Checkpoint | None) -> Report:
        return Report(
            fault=fault,
            entries=self.chain.entries,
            rows=self.rows,
            head=self.chain.head if self.chain.entries else None,
            root=self.chain.tree.root.hex(),
            checkpoint_size=checkpoint.size if checkpoint else None,
            covered=(store.EVENTS, store.HEAD, *(table.name for table in self.covered)),
            not_covered=self.not_covered,
            notes=self.chain.notes,
            signatures=self.chain.signatures,
        )

    def verify(self, connection: Connection, open_streams: ExitStack, progress: Progress | None) -> None:
        self.covered, self.not_covered = store.tables(connection)
        total = store.count(connection, store.EVENTS)
        kept = {table.name: _Rows(connection, table, open_streams) for table in self.covered}
        events = open_streams.enter_context(closing(store.rows(connection, store.EVENTS, "number")))
        for event in events:
            recorded = self._check_entry(event)["rows"]
            number = self.chain.entries
            for name, rows in kept.items():
                if name in recorded or rows.due <= number:
                    self.rows += rows.check(number, recorded.get(name, []))
            _check_tables_exist(number, recorded, kept)
            if progress is not None and number % PROGRESS_EVERY == 0:
                progress(number, total)
        for rows in kept.values():
            rows.check_end()
        self.chain.end()
        _check_head(connection, self.chain)
        between = store.stands_between(connection, [store.EVENTS, store.HEAD, *kept])
        if between is not None:
            table, what = between
            raise Broken(what, table=table)
        # last, since it names no row: an index that hides one, a row that breaks a constraint
        damage = store.damage(connection)
        if damage is not None:
            raise Broken(f"the database's own check of its file says: {damage}")

    def _check_entry(self, event: Mapping[str, Any]) -> dict[str, Any]:
        number = self.chain.entries + 1
        if event["number"] != number:
            raise Broken(f"entry {number} is missing; the next one is {event['number']}", entry=number)
        raw = _bytes(event["canonical"])
        if raw is None:
            raise Broken("column canonical does not hold bytes", entry=number)
        entry = self.chain.add(raw, event["digest"])
        _check_columns(event, entry, number)
        return entry


def _bytes(value: object) -> bytes | None:
    """Return a column's bytes; None for another kind of value, which SQLite takes in any column."""
    return bytes(value) if isinstance(value, (bytes, memoryview)) else None


def _check_columns(event: Mapping[str, Any], entry: dict[str, Any], number: int) -> None:
    for name in PROJECTED:
        if event[name] != entry.get(name):
            raise _other_column(name, event[name], entry, number)
    time = store.as_time(event["time"])
    if time != entry.get("time"):
        raise _other_column("time", time, entry, number)


def _other_column(name: str, found: object, entry: dict[str, Any], number: int) -> Broken:
    return Broken(f"column {name} says {found!r}, the bytes say {entry.get(name)!r}", entry=number)


def _check_tables_exist(number: int, recorded: dict[str, Any], kept: Mapping[str, object]) -> None:
    for name in recorded:
        if name not in kept:
            raise Broken("the table is missing", entry=number, table=name)


def _check_head(connection: Connection, chain: Chain) -> None:
    heads = list(store.rows(connection, store.HEAD, "id"))
    if len(heads) != 1:
        raise Broken(f"there are {len(heads)} heads", table=store.HEAD)
    head = heads[0]
    expected = {
        "size": chain.entries,
        "digest": chain.head,
        "time": chain.time or None,
        "right_edge": chain.tree.edge,
    }
    found = {
        "size": head["size"],
        "digest": head["digest"],
        "time": store.as_time(head["time"]),
        "right_edge": _bytes(head["right_edge"]),
    }
    for name, value in expected.items():
        if found[name] != value:
            raise Broken(f"{name} does not fit the entries", table=store.HEAD, row="id 1")


_NEVER, _AT_ONCE = float("inf"), 0


class _Rows:
    """The rows of one table, read along with the entries that vouch for them."""

    def __init__(self, connection: Connection, table: Table, open_streams: ExitStack) -> None:
        self._table = table
        rows = store.rows(connection, table.name, store.TIE)
        self._rows: Iterator[Mapping[str, Any]] = open_streams.enter_context(closing(rows))
        self._move_on()

    def _move_on(self) -> None:
        self._next = next(self._rows, None)
        tie = None if self._next is None else self._next[store.TIE]
        self.due: float = _NEVER if self._next is None else tie if isinstance(tie, int) else _AT_ONCE
        """Number of the entry that the next row is tied to; a tie that is no number is a fault at once."""

    def check(self, number: int, recorded: list[dict[str, Any]]) -> int:
        """Hold the rows of one entry against what it recorded of them; return how many there are."""
        waiting = self._waiting(number, recorded)
        found = 0
        while self._next is not None and self.due == number:
            name = self._table.row_name(self._next)
            expected = waiting.pop(name, None)
            if expected is None:
                raise Broken(
                    "the entry knows nothing of this row", entry=number, table=self._table.name, row=name
                )
            self._compare(number, name, expected, self._table.values(self._next))
            self._move_on()
            found += 1
        # in order, so that what is still below was passed: it is tied to no entry
        if self.due <= number:
            self.check_end()
        for name in waiting:
            raise Broken("the row is missing", entry=number, table=self._table.name, row=name)
        return found

    def _waiting(self, number: int, recorded: list[dict[str, Any]]) -> dict[str, dict[str, Any]]:
        try:
            return {self._table.row_name(row): row for row in recorded}
        except KeyError:
            raise Broken(
                "what the entry recorded are no rows", entry=number, table=self._table.name
            ) from None

    def check_end(self) -> None:
        """Raise where rows are left that no entry vouches for."""
        if self._next is not None:
            name = self._table.row_name(self._next)
            raise Broken("no entry vouches for this row", table=self._table.name, row=name)

    def _compare(self, number: int, name: str, expected: dict[str, Any], found: dict[str, object]) -> None:
        for column in (*expected, *(found.keys() - expected.keys())):
            if not _same(expected.get(column), found.get(column)):
                what = f"column {column} is not what the entry recorded"
                raise Broken(what, entry=number, table=self._table.name, row=name)


def _same(recorded: object, found: object) -> bool:
    """Compare with types: SQLite takes a text in a number's place, and has 0 and 1 for false and true."""
    if isinstance(recorded, bool):
        return isinstance(found, int) and found in (0, 1) and bool(found) == recorded
    return type(recorded) is type(found) and recorded == found
