"""Entries of the history as CSV (RFC 4180) for a spreadsheet, in which no text becomes a formula."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from dataclasses import replace

from service.api.answers import Answer
from service.documents import writing
from service.records.views import EventView

COLUMNS = ("number", "time", "kind", "actor", "site", "tag", "area", "content", "digest")

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
"""First characters by which spreadsheets take a text for a formula (OWASP, CSV injection)."""


def as_csv(page: Answer, entries: Iterable[EventView]) -> Answer:
    """Return the page with its links, and the entries as rows under a header."""
    text = io.StringIO(newline="")
    rows = csv.writer(text)
    rows.writerow(COLUMNS)
    rows.writerows([_cell(name, entry) for name in COLUMNS] for entry in entries)
    return replace(page, body=text.getvalue().encode(), media_type="text/csv; charset=utf-8")


def _cell(name: str, entry: EventView) -> str | int:
    value = getattr(entry, name)
    if value is None:
        return ""
    if isinstance(value, int):
        return value
    text = value if isinstance(value, str) else _as_text(value)
    return f"'{text}" if text.startswith(_FORMULA_STARTS) else text


def _as_text(value: object) -> str:
    plain = writing.plain(value)
    return plain if isinstance(plain, str) else writing.to_bytes(plain).decode()
