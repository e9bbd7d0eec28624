"""The history: one log of entries without gaps, each tied to the one before and to the rows it vouches for.

An entry's exact bytes are its canonical JSON (RFC 8785), kept as they were hashed. They hold the digest of
the entry before, so that the entries form a chain; their digest is the leaf hash of RFC 9162, section 2.1.1,
so that the same digests are the leaves of a Merkle tree. They also hold every column of every row that was
inserted with the entry (bytes columns by their SHA-256), so that a changed, removed or added row is found.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import cache
from typing import Any

from sqlalchemy import Insert, insert, inspect, select, update
from sqlalchemy.orm import Session

from service.documents.canonical import canonical_bytes
from service.documents.strict_json import Plain
from service.documents.writing import plain
from service.records import merkle
from service.records.event_kinds import EventKind
from service.records.roles import CONSOLE, Actor
from service.records.tables.columns import Base
from service.records.tables.history import HistoryEvent, HistoryHead
from service.records.views import EntryReference, HeadView

TIE = "event_number"
"""The column that ties a kept row to the entry that vouches for it."""

STORE_MADE: EventKind = "store_made"
"""The kind of the first entry of every history."""

# statements are made once: making one costs more than running it
_HEAD_TABLE = Base.metadata.tables[HistoryHead.__tablename__]
_HEAD = select(*(_HEAD_TABLE.columns[name] for name in ("size", "digest", "time", "right_edge")))
_LOCKED_HEAD = _HEAD.with_for_update()
_TURN = select(_HEAD_TABLE.columns["size"]).with_for_update()
_MOVE_HEAD = update(_HEAD_TABLE)


@dataclass(frozen=True, kw_only=True, slots=True)
class About:
    """The loop that an entry is about."""

    loop_id: str
    site: str
    tag: str
    area: str


@dataclass(frozen=True, kw_only=True, slots=True)
class _Told:
    """What an entry tells, the rows aside."""

    kind: EventKind
    actor: str
    content: Mapping[str, object]
    time: datetime
    about: About | None


def take_turn(session: Session) -> None:
    """Wait until no other writer is at work. SQLite waits at BEGIN IMMEDIATE and ignores FOR UPDATE."""
    session.execute(_TURN)


def append(
    session: Session,
    *,
    kind: EventKind,
    actor: Actor,
    content: Mapping[str, object],
    now: datetime,
    about: About | None = None,
    rows: Iterable[Base] = (),
) -> EntryReference:
    """Insert `rows` and the one entry that vouches for them, and move the head. Flushes what was begun.

    `content` says what happened, in words and numbers that are made to be read (whatever
    `service.documents.writing.plain` takes). `rows` are kept rows, in the order in which they are inserted.
    """
    session.flush()
    size, previous, _, right_edge = session.execute(_LOCKED_HEAD).one()
    rows = tuple(rows)
    told = _Told(kind=kind, actor=actor.name, content=content, time=now, about=about)
    event = _event(told, rows, size + 1, previous)
    connection = session.connection()
    connection.execute(_insertion(HistoryEvent), _values(event))
    right_edge = merkle.with_leaf(right_edge, size, bytes.fromhex(event.digest))
    moved = {"size": event.number, "digest": event.digest, "time": now, "right_edge": right_edge}
    connection.execute(_MOVE_HEAD, moved)
    # one by one, in the order in which they refer to each other
    for row in rows:
        connection.execute(_insertion(type(row)), _values(row) | {TIE: event.number})
    return EntryReference(number=event.number, digest=event.digest, time=now)


def begin(session: Session, *, demonstration: bool, now: datetime) -> None:
    """Write the first entry of an empty history; nothing where there is one."""
    if head(session).size == 0:
        append(session, kind=STORE_MADE, actor=CONSOLE, content={"demonstration": demonstration}, now=now)


def is_demonstration(session: Session) -> bool:
    """Say whether the first entry of the history says that the store is a demonstration's."""
    first = session.get(HistoryEvent, 1)
    return first is not None and first.kind == STORE_MADE and b'"demonstration":true' in first.canonical


def last_content(session: Session, *kinds: EventKind) -> dict[str, Any] | None:
    """Return what the last entry of these kinds tells; None where there is none."""
    query = select(HistoryEvent.canonical).where(HistoryEvent.kind.in_(kinds))
    found = session.execute(query.order_by(HistoryEvent.number.desc()).limit(1)).scalar_one_or_none()
    return None if found is None else dict(json.loads(found)["content"])


def leaves(session: Session, size: int) -> list[bytes]:
    """Return the leaf hashes of the first `size` entries."""
    query = select(HistoryEvent.digest).where(HistoryEvent.number <= size).order_by(HistoryEvent.number)
    return [bytes.fromhex(digest) for digest in session.execute(query).scalars()]


def origin(session: Session) -> str:
    """Return the digest of the first entry, which names the store; empty before there is one."""
    first = session.get(HistoryEvent, 1)
    return first.digest if first is not None else ""


def head(session: Session) -> HeadView:
    """Return where the history stands."""
    size, digest, time, right_edge = session.execute(_HEAD).one()
    return HeadView(size=size, digest=digest, root=merkle.root(right_edge).hex(), time=time)


def _event(told: _Told, rows: tuple[Base, ...], number: int, previous: str) -> HistoryEvent:
    """Make the entry that follows on the head: its canonical bytes, their digest, the searchable columns."""
    about = told.about
    projected: dict[str, Plain] = {
        "number": number,
        "kind": told.kind,
        "actor": told.actor,
        "loop_id": about.loop_id if about else None,
        "site": about.site if about else None,
        "tag": about.tag if about else None,
        "area": about.area if about else None,
        "previous": previous,
    }
    more: dict[str, Plain] = {
        "time": plain(told.time),
        "content": plain(dict(told.content)),
        "rows": _rows_by_table(rows),
    }
    canonical = canonical_bytes(projected | more)
    digest = merkle.leaf_hash(canonical).hex()
    return HistoryEvent(**projected, time=told.time, canonical=canonical, digest=digest)


def _rows_by_table(rows: tuple[Base, ...]) -> dict[str, Plain]:
    by_table: dict[str, list[Plain]] = {}
    for row in rows:
        by_table.setdefault(row.__tablename__, []).append(_columns(row))
    return dict(by_table)


def _columns(row: Base) -> dict[str, Plain]:
    """Every column but the entry's own number; bytes by their SHA-256, times as RFC 3339 in UTC."""
    return {name: _value(value) for name, value in _values(row).items() if name != TIE}


def _values(row: Base) -> dict[str, Any]:
    return {name: getattr(row, name) for name in _names(type(row))}


@cache
def _names(table: type[Base]) -> tuple[str, ...]:
    return tuple(column.key for column in inspect(table).columns)


@cache
def _insertion(table: type[Base]) -> Insert:
    return insert(Base.metadata.tables[table.__tablename__])


def _value(value: object) -> Plain:
    if isinstance(value, bytes):
        return hashlib.sha256(value).hexdigest()
    if isinstance(value, datetime):
        return plain(value.astimezone(UTC))
    if value is None or isinstance(value, (str, bool, int)):
        return value
    raise TypeError(f"a {type(value).__name__} has no place in a kept column")
