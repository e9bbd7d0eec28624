"""Verifying an export of the history: one entry a line, without the store that it came from.

A line is a JSON object with `number`, `digest`, `canonical` (the text whose UTF-8 bytes the digest is made
of) and `rows`: table → the rows that were inserted with the entry, as they lie in the store, bytes in base64
under the name `base64`. A line without `rows` has its entry verified alone, and the report says so.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Iterable
from typing import Any

from service.verification.chain import Chain
from service.verification.checkpoints import Checkpoint
from service.verification.report import Broken, Fault, Report

WITHOUT_ROWS = "the export has entries without their rows, of which only the digests were verified"


def verify_export(
    lines: Iterable[bytes], *, checkpoint: Checkpoint | None = None, held_key: str | None = None
) -> Report:
    """Verify each entry with its rows, that it follows on the one before, and the root of them all."""
    reading = _Reading(Chain(checkpoint, held_key))
    fault: Fault | None = None
    try:
        for line in lines:
            reading.add(line)
        reading.chain.end()
    except Broken as broken:
        fault = broken.fault
    return reading.report(fault, checkpoint)


class _Reading:
    """How far the reading has come."""

    def __init__(self, chain: Chain) -> None:
        self.chain = chain
        self.rows = 0
        self._tables: set[str] = set()
        self._without_rows = False

    def report(self, fault: Fault | None, checkpoint: Checkpoint | None) -> Report:
        chain = self.chain
        return Report(
            fault=fault,
            entries=chain.entries,
            rows=self.rows,
            head=chain.head if chain.entries else None,
            root=chain.tree.root.hex(),
            checkpoint_size=checkpoint.size if checkpoint else None,
            covered=("history_events", *sorted(self._tables)),
            not_covered=(),
            signatures=chain.signatures,
            notes=(*chain.notes, *((WITHOUT_ROWS,) if self._without_rows else ())),
        )

    def add(self, line: bytes) -> None:
        document = self._document(line)
        entry = self.chain.add(document["canonical"], document["digest"])
        rows = document.get("rows")
        if rows is None:
            self._without_rows = True
        else:
            self._check_rows(rows, entry["rows"])

    def _document(self, line: bytes) -> dict[str, Any]:
        try:
            document = json.loads(line)
        except ValueError:
            document = None
        is_entry = (
            isinstance(document, dict)
            and isinstance(document.get("canonical"), str)
            and isinstance(document.get("digest"), str)
            and isinstance(document.get("rows"), dict | None)
        )
        raw = _bytes(document["canonical"]) if is_entry else None
        if raw is None:
            raise Broken("the line is no entry of an export", entry=self.chain.entries + 1)
        whole: dict[str, Any] = document | {"canonical": raw}
        return whole

    def _check_rows(self, exported: dict[str, Any], recorded: dict[str, Any]) -> None:
        number = self.chain.entries
        for table in sorted({*exported, *recorded}):
            waiting = sorted(_text(row) for row in recorded.get(table, []))
            rows = exported.get(table, [])
            if not isinstance(rows, list):
                raise Broken("what the export holds are no rows", entry=number, table=table)
            found = sorted(_text(_as_recorded(row, number, table)) for row in rows)
            strange = [row for row in found if row not in waiting]
            if strange:
                what = "a row is not what the entry recorded"
                raise Broken(what, entry=number, table=table, row=_shortened(strange[0]))
            if len(found) != len(waiting):
                raise Broken("the rows are not as many as the entry recorded", entry=number, table=table)
            self._tables.add(table)
            self.rows += len(found)


def _bytes(canonical: str) -> bytes | None:
    try:
        return canonical.encode()
    except UnicodeEncodeError:
        return None


def _as_recorded(row: object, number: int, table: str) -> dict[str, object]:
    if not isinstance(row, dict):
        raise Broken("what the export holds is no row", entry=number, table=table)
    try:
        return {name: _value(value) for name, value in row.items()}
    except (KeyError, TypeError, ValueError):
        raise Broken("a row has a value that is none", entry=number, table=table) from None


def _value(value: object) -> object:
    if isinstance(value, dict):
        return hashlib.sha256(base64.b64decode(value["base64"], validate=True)).hexdigest()
    return value


def _text(row: object) -> str:
    return json.dumps(row, sort_keys=True, ensure_ascii=False)


def _shortened(row: str, characters_max: int = 120) -> str:
    return row if len(row) <= characters_max else f"{row[:characters_max]}…"
