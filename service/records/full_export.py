"""All that the history vouches for, entry by entry: its exact bytes and the rows that were inserted with it.

What comes out can be verified, and read, without the store: years later, by someone else's program.
"""

from __future__ import annotations

import base64
from collections.abc import Generator, Iterator, Mapping
from contextlib import ExitStack, closing
from dataclasses import dataclass
from datetime import UTC, datetime

from sqlalchemy import RowMapping, Table, select
from sqlalchemy.orm import Session

from service.documents.strict_json import Plain
from service.documents.writing import plain
from service.records.history import TIE
from service.records.tables import collection
from service.records.tables.history import HistoryEvent

ROWS_AT_A_TIME = 500


@dataclass(frozen=True, kw_only=True, slots=True)
class ExportedEntry:
    """One entry. `rows`: table → rows, as they lie in the store; bytes in base64 under the name `base64`."""

    number: int
    digest: str
    canonical: str
    rows: Mapping[str, tuple[dict[str, Plain], ...]]


def entries(session: Session) -> Iterator[ExportedEntry]:
    """All entries in order, with their rows; a few at a time are held in memory."""
    tables = collection.metadata()
    kept = [table for table in tables.sorted_tables if TIE in table.columns]
    log = tables.tables[HistoryEvent.__tablename__]
    with ExitStack() as open_streams:
        streams = [_Stream(session, table, open_streams) for table in kept]
        events = open_streams.enter_context(closing(_rows(session, log, "number")))
        for event in events:
            number = event["number"]
            rows = {stream.table: stream.of(number) for stream in streams if stream.is_due(number)}
            yield ExportedEntry(
                number=number, digest=event["digest"], canonical=event["canonical"].decode(), rows=rows
            )


class _Stream:
    """The rows of one table, read along with the entries."""

    def __init__(self, session: Session, table: Table, open_streams: ExitStack) -> None:
        self.table = table.name
        self._rows = open_streams.enter_context(closing(_rows(session, table, TIE)))
        self._next = next(self._rows, None)

    def is_due(self, number: int) -> bool:
        return self._next is not None and self._next[TIE] == number

    def of(self, number: int) -> tuple[dict[str, Plain], ...]:
        found = []
        while self._next is not None and self._next[TIE] == number:
            found.append({name: _value(value) for name, value in self._next.items() if name != TIE})
            self._next = next(self._rows, None)
        return tuple(found)


def _rows(session: Session, table: Table, order: str) -> Generator[RowMapping]:
    query = select(table).order_by(table.columns[order], *table.primary_key.columns)
    streaming = {"stream_results": True, "yield_per": ROWS_AT_A_TIME}
    with session.connection().execute(query, execution_options=streaming) as result:
        yield from result.mappings()


def _value(value: object) -> Plain:
    if isinstance(value, bytes):
        return {"base64": base64.b64encode(value).decode()}
    if isinstance(value, datetime):
        return plain(value.astimezone(UTC))
    return plain(value)
