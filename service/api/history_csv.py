"""Entries of the history as CSV (RFC 4180) for a spreadsheet, in which no text becomes a formula."""

from __future__ import annotations

import csv
import io

from service.api.answers import Answer, links
from service.documents import writing
from service.records.views import EventView, Page

COLUMNS = ("number", "time", "kind", "actor", "site", "tag", "area", "content", "digest")

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
"""First characters by which spreadsheets take a text for a formula (OWASP, CSV injection)."""


def table(part: Page[EventView]) -> Answer:
    """Answer with the entries of a page as rows under a header, and with its links."""
    text = io.StringIO(newline="")
    rows = csv.writer(text)
    rows.writerow(COLUMNS)
    rows.writerows([_cell(name, entry) for name in COLUMNS] for entry in part.items)
    body = text.getvalue().encode()
    return Answer(body=body, media_type="text/csv; charset=utf-8", link=links(part))


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
