"""Verifying a store: the chain, the digests, and every row that an entry vouches for.

Entries are read in order and each is held against its own bytes: digest, chain, searchable columns, then
the rows that were inserted with it. The first place that does not hold is named, and the reading ends
there: after a break nothing more can be said.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection
from sqlalchemy.exc import DBAPIError, SQLAlchemyError

from service.verification import store
from service.verification.report import Fault, Report
from service.verification.store import Table
from service.verification.tree import Tree, leaf_hash

BEFORE_THE_FIRST = "0" * 64
PROJECTED = ("number", "kind", "actor", "loop_id", "site", "tag", "area", "previous")
"""Columns of an entry that repeat a part of its bytes, the time aside."""

Progress = Callable[[int, int], None]
"""Called now and then with the entries verified and the entries in all."""

PROGRESS_EVERY = 1000


@dataclass(frozen=True, kw_only=True, slots=True)
class Checkpoint:
    """How far a history reached and what its root was, as somebody outside the store has kept it."""

    size: int
    root: str

    @staticmethod
    def read(raw: bytes) -> Checkpoint:
        """Read a checkpoint as the service gives it out. Raises ValueError where it is none."""
        try:
            document = json.loads(raw)
            return Checkpoint(size=int(document["size"]), root=str(document["digest"]))
        except (KeyError, TypeError, ValueError) as error:
            raise ValueError("this is no checkpoint: it has a size and a digest") from error


class _Broken(Exception):
    def __init__(self, what: str, entry: int | None = None, table: str | None = None, row: str | None = None):
        self.fault = Fault(entry=entry, table=table, row=row, what=what)


def verify(url: str, *, checkpoint: Checkpoint | None = None, progress: Progress | None = None) -> Report:
    """Verify the store at `url`, and that its history is the one the checkpoint was made of.

    Reads only. A store that cannot be read is a fault, not an exception.
    """
    state = _State()
    fault: Fault | None = None
    try:
        with store.opened(url) as connection:
            _verify(connection, state, checkpoint, progress)
    except _Broken as broken:
        fault = broken.fault
    except (DBAPIError, SQLAlchemyError) as error:
        cause = error.orig if isinstance(error, DBAPIError) else error
        fault = Fault(entry=None, table=None, row=None, what=f"the store cannot be read: {cause}")
    return state.report(fault, checkpoint)


class _State:
    """How far the reading has come."""

    def __init__(self) -> None:
        self.entries = 0
        self.rows = 0
        self.head = BEFORE_THE_FIRST
        self.time = ""
        self.tree = Tree()
        self.covered: tuple[Table, ...] = ()
        self.not_covered: tuple[str, ...] = ()
        self.notes: list[str] = []

    def report(self, fault: Fault | None, checkpoint: Checkpoint | None) -> Report:
        return Report(
            fault=fault,
            entries=self.entries,
            rows=self.rows,
            head=self.head if self.entries else None,
            root=self.tree.root.hex(),
            checkpoint_size=checkpoint.size if checkpoint else None,
            covered=(store.EVENTS, store.HEAD, *(table.name for table in self.covered)),
            not_covered=self.not_covered,
            notes=tuple(self.notes),
        )


def _verify(
    connection: Connection, state: _State, checkpoint: Checkpoint | None, progress: Progress | None
) -> None:
    state.covered, state.not_covered = store.tables(connection)
    total = store.count(connection, store.EVENTS)
    kept = {table.name: _Rows(connection, table) for table in state.covered}
    for event in store.rows(connection, store.EVENTS, "number"):
        entry = _check_entry(event, state)
        for name, rows in kept.items():
            state.rows += rows.check(state.entries, entry["rows"].get(name, []))
        _check_tables_exist(state.entries, entry["rows"], kept)
        if checkpoint is not None and checkpoint.size == state.entries:
            _check_root(state, checkpoint)
        if progress is not None and state.entries % PROGRESS_EVERY == 0:
            progress(state.entries, total)
    for rows in kept.values():
        rows.check_end()
    if checkpoint is not None and checkpoint.size > state.entries:
        raise _Broken(f"the checkpoint covers {checkpoint.size} entries, and there are only {state.entries}")
    _check_head(connection, state)
    # last, since it names no row: an index that hides one, a row that breaks a constraint
    damage = store.damage(connection)
    if damage is not None:
        raise _Broken(f"the database's own check of its file says: {damage}")


def _check_entry(event: Mapping[str, Any], state: _State) -> dict[str, Any]:
    """Hold one entry against its own bytes and the entry before; return what the bytes say."""
    number = state.entries + 1
    if event["number"] != number:
        raise _Broken(f"entry {number} is missing; the next one is {event['number']}", number)
    raw = _bytes(event["canonical"])
    if raw is None:
        raise _Broken("column canonical does not hold bytes", number)
    leaf = leaf_hash(raw)
    if leaf.hex() != event["digest"]:
        raise _Broken("the bytes do not have the digest that stands beside them", number)
    entry = _parsed(raw, number)
    _check_columns(event, entry, number)
    if entry["previous"] != state.head:
        raise _Broken("it does not follow on the entry before it: the chain is broken", number)
    if number > 1 and str(entry["time"]) < state.time:
        state.notes.append(
            f"entry {number} has an earlier time than the one before it: the clock was set back"
        )
    state.tree.add(leaf)
    state.entries, state.head, state.time = number, leaf.hex(), str(entry["time"])
    return entry


def _bytes(value: object) -> bytes | None:
    """Return a column's bytes; None for another kind of value, which SQLite takes in any column."""
    return bytes(value) if isinstance(value, (bytes, memoryview)) else None


def _parsed(raw: bytes, number: int) -> dict[str, Any]:
    try:
        entry = json.loads(raw)
    except ValueError:
        entry = None
    if not isinstance(entry, dict) or not isinstance(entry.get("rows"), dict):
        raise _Broken("the bytes are not an entry", number)
    return entry


def _check_columns(event: Mapping[str, Any], entry: dict[str, Any], number: int) -> None:
    shown = {name: event[name] for name in PROJECTED} | {"time": store.as_time(event["time"])}
    for name, value in shown.items():
        if value != entry.get(name):
            raise _Broken(f"column {name} says {value!r}, the bytes say {entry.get(name)!r}", number)


def _check_tables_exist(number: int, recorded: dict[str, Any], kept: Mapping[str, object]) -> None:
    for name in recorded:
        if name not in kept:
            raise _Broken("the table is missing", number, name)


def _check_root(state: _State, checkpoint: Checkpoint) -> None:
    if state.tree.root.hex() != checkpoint.root:
        raise _Broken(
            f"the first {checkpoint.size} entries are not those that the checkpoint was made of: the history"
            " was rewritten somewhere in them"
        )


def _check_head(connection: Connection, state: _State) -> None:
    heads = list(store.rows(connection, store.HEAD, "id"))
    if len(heads) != 1:
        raise _Broken(f"there are {len(heads)} heads", None, store.HEAD)
    head = heads[0]
    expected = {
        "size": state.entries,
        "digest": state.head,
        "time": state.time or None,
        "right_edge": state.tree.edge,
    }
    found = {
        "size": head["size"],
        "digest": head["digest"],
        "time": store.as_time(head["time"]),
        "right_edge": _bytes(head["right_edge"]),
    }
    for name, value in expected.items():
        if found[name] != value:
            raise _Broken(f"{name} does not fit the entries", None, store.HEAD, "id 1")


class _Rows:
    """The rows of one table, read along with the entries that vouch for them."""

    def __init__(self, connection: Connection, table: Table) -> None:
        self._table = table
        self._rows: Iterator[Mapping[str, Any]] = store.rows(connection, table.name, store.TIE)
        self._next = next(self._rows, None)

    def check(self, number: int, recorded: list[dict[str, Any]]) -> int:
        """Hold the rows of one entry against what it recorded of them; return how many there are."""
        # most entries have no row in most tables
        if not recorded and (self._next is None or self._comes_after(self._next[store.TIE], number)):
            return 0
        found = list(self._of(number))
        waiting = {self._table.row_name(row): row for row in recorded}
        for row in found:
            name = self._table.row_name(row)
            expected = waiting.pop(name, None)
            if expected is None:
                raise _Broken("the entry knows nothing of this row", number, self._table.name, name)
            self._compare(number, name, expected, self._table.values(row))
        for name in waiting:
            raise _Broken("the row is missing", number, self._table.name, name)
        return len(found)

    def check_end(self) -> None:
        """Raise where rows are left that no entry vouches for."""
        if self._next is not None:
            self._orphan(self._next)

    def _of(self, number: int) -> Iterator[Mapping[str, Any]]:
        while self._next is not None and self._next[store.TIE] == number:
            yield self._next
            self._next = next(self._rows, None)
        # in order, so that what is still below was passed: it is tied to no entry
        if self._next is not None and not self._comes_after(self._next[store.TIE], number):
            self._orphan(self._next)

    @staticmethod
    def _comes_after(tie: object, number: int) -> bool:
        return isinstance(tie, int) and tie > number

    def _orphan(self, row: Mapping[str, Any]) -> None:
        name = self._table.row_name(row)
        raise _Broken("no entry vouches for this row", None, self._table.name, name)

    def _compare(self, number: int, name: str, expected: dict[str, Any], found: dict[str, object]) -> None:
        for column in (*expected, *(found.keys() - expected.keys())):
            if not _same(expected.get(column), found.get(column)):
                what = f"column {column} is not what the entry recorded"
                raise _Broken(what, number, self._table.name, name)


def _same(recorded: object, found: object) -> bool:
    """Compare with types: SQLite takes a text in a number's place, and has 0 and 1 for false and true."""
    if isinstance(recorded, bool):
        return isinstance(found, int) and found in (0, 1) and bool(found) == recorded
    return type(recorded) is type(found) and recorded == found
