"""An export stands for the store: everything that it holds is held against what the entries recorded."""

from __future__ import annotations

import base64
import json
from collections.abc import Callable
from typing import Any

import pytest

from service.documents import writing
from service.records import full_export
from service.verification.checkpoints import Checkpoint
from service.verification.export import WITHOUT_ROWS, verify_export
from service.verification.report import Report
from tests.records.store import Store
from tests.verification.conftest import Owned
from tests.verification.forging import leaf

Lines = list[dict[str, Any]]


@pytest.fixture
def lines(owned: Owned) -> Lines:
    """The export of a store, a line each, to be tampered with."""
    store = Store(owned.url)
    with store.database.reading() as session:
        raw = [writing.to_bytes(entry) for entry in full_export.entries(session)]
    store.database.close()
    return [json.loads(line) for line in raw]


def verified(lines: Lines, checkpoint: Checkpoint | None = None) -> Report:
    return verify_export((json.dumps(line).encode() for line in lines), checkpoint=checkpoint)


def test_an_export_says_what_the_store_says(owned: Owned, lines: Lines) -> None:
    store, export = owned.verify(), verified(lines)
    assert verified(lines, owned.checkpoint()).holds
    assert (export.entries, export.rows, export.head, export.root) == (
        store.entries,
        store.rows,
        store.head,
        store.root,
    )
    assert set(export.covered) == set(store.covered) - {"history_head"}
    assert (export.notes, export.checkpoint_size) == ((), None)


def test_an_entry_that_is_missing_is_named(lines: Lines) -> None:
    del lines[4]
    fault = verified(lines).fault
    assert fault is not None
    assert fault.sentence() == "entry 5: it is missing; entry 6 stands in its place"


def test_an_export_of_nothing_has_no_head() -> None:
    report = verify_export([])
    assert (report.fault, report.entries, report.head) == (None, 0, None)


def test_the_report_says_how_much_the_checkpoint_covers(owned: Owned, lines: Lines) -> None:
    given = owned.checkpoint()
    assert verified(lines, given).checkpoint_size == owned.verify(given).checkpoint_size == given.size


def _line_of(lines: Lines, table: str) -> dict[str, Any]:
    return next(line for line in lines if table in line["rows"])


def _other_text(row: dict[str, Any]) -> None:
    row["description"] += "x"


def _other_bytes(row: dict[str, Any]) -> None:
    raw = base64.b64decode(row["content"]["base64"])
    row["content"]["base64"] = base64.b64encode(raw.replace(b"40", b"41")).decode()


def _no_base64(row: dict[str, Any]) -> None:
    row["content"] = {"base64": "no base64 at all"}


def _other_letters_in_base64(row: dict[str, Any]) -> None:
    row["content"]["base64"] = "\n" + row["content"]["base64"]


def _column_added(row: dict[str, Any]) -> None:
    row["remark"] = "added"


def _column_removed(row: dict[str, Any]) -> None:
    del row["description"]


@pytest.mark.parametrize("tamper", [_other_text, _other_bytes, _no_base64, _column_added, _column_removed])
def test_a_row_that_is_not_what_was_recorded_is_named(
    lines: Lines, tamper: Callable[[dict[str, Any]], None]
) -> None:
    line = _line_of(lines, "loop_revisions")
    tamper(line["rows"]["loop_revisions"][0])
    report = verified(lines)
    assert report.fault is not None
    assert (report.fault.entry, report.fault.table) == (line["number"], "loop_revisions")


@pytest.mark.parametrize("tamper", [_no_base64, _other_letters_in_base64])
def test_bytes_can_be_written_in_one_way_only(lines: Lines, tamper: Callable[[dict[str, Any]], None]) -> None:
    tamper(_line_of(lines, "loop_revisions")["rows"]["loop_revisions"][0])
    fault = verified(lines).fault
    assert fault is not None
    assert fault.what == "a row has a value that is none"


@pytest.mark.parametrize(("characters", "shown"), [(120, 120), (121, 121), (500, 121)])
def test_a_strange_row_is_shown_as_it_is_and_a_long_one_in_part(characters: int, shown: int) -> None:
    frame = len('{"tag": ""}')
    raw = json.dumps({"number": 1, "previous": "0" * 64, "kind": "store_made", "rows": {"loops": []}})
    row = {"tag": "ä" * (characters - frame)}
    line = {"canonical": raw, "digest": leaf(raw.encode()).hex(), "rows": {"loops": [row]}}
    fault = verified([line]).fault
    assert fault is not None
    assert fault.row is not None
    assert (len(fault.row), fault.row.endswith("…")) == (shown, characters > 120)
    assert 'row {"tag": "ää' in fault.sentence()


def test_a_row_taken_out_put_in_or_doubled_is_named(lines: Lines) -> None:
    line = _line_of(lines, "submission_authors")
    row = line["rows"]["submission_authors"][0]
    for rows in ([], [row, row], [row, row | {"account_id": "0" * 32}], ["no row"]):
        line["rows"]["submission_authors"] = rows
        report = verified(lines)
        assert report.fault is not None
        assert (report.fault.entry, report.fault.table) == (line["number"], "submission_authors")


def test_a_row_in_a_table_that_no_entry_speaks_of_is_named(lines: Lines) -> None:
    lines[0]["rows"]["decisions"] = [{"id": "1"}]
    report = verified(lines)
    assert report.fault is not None
    assert (report.fault.entry, report.fault.table) == (1, "decisions")


def test_entries_without_their_rows_are_verified_alone_and_that_is_said(lines: Lines) -> None:
    report = verified([{"digest": line["digest"], "canonical": line["canonical"]} for line in lines])
    assert report.holds
    assert report.notes == (WITHOUT_ROWS,)


@pytest.mark.parametrize(
    "line",
    [
        b"",
        b"[]",
        b"7",
        b'{"digest": "x"}',
        b'{"canonical": 1, "digest": "x"}',
        b'{"canonical": "x", "digest": 1}',
        b"\xff",
        b'{"rows": 1}',
    ],
)
def test_a_line_that_is_no_entry_is_a_fault(line: bytes) -> None:
    report = verify_export([line])
    assert report.fault is not None
    assert (report.fault.entry, report.fault.what) == (1, "the line is no entry of an export")


@pytest.mark.parametrize("rows", [7, [], "rows"])
def test_a_line_whose_rows_are_in_no_tables_is_no_entry(lines: Lines, rows: object) -> None:
    fault = verified([lines[0] | {"rows": rows}]).fault
    assert fault is not None
    assert (fault.entry, fault.what) == (1, "the line is no entry of an export")


@pytest.mark.parametrize("rows", [7, None, {"id": 1}, "rows", [7]])
def test_rows_that_are_none_are_named_in_the_entry_and_in_the_export(rows: object) -> None:
    entry = {"number": 1, "previous": "0" * 64, "kind": "store_made", "rows": {}}
    for recorded, exported in (({"loops": rows}, {}), ({}, {"loops": rows})):
        raw = json.dumps(entry | {"rows": recorded})
        line = {"canonical": raw, "digest": leaf(raw.encode()).hex(), "rows": exported}
        fault = verified([line]).fault
        assert fault is not None
        assert (fault.entry, fault.table) == (1, "loops")


def test_a_line_that_no_bytes_can_be_made_of_is_no_entry() -> None:
    fault = verified([{"canonical": "\ud800", "digest": "0" * 64}]).fault
    assert fault is not None
    assert fault.sentence() == "entry 1: the line is no entry of an export"
