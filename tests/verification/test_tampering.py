"""What somebody who owns the database may do to it, and that the verification names the place."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from dataclasses import replace
from datetime import datetime
from pathlib import Path
from typing import Any

import pytest

from service.verification.report import Report
from tests.databases import Databases, file_of, is_sqlite
from tests.verification.conftest import Owned
from tests.verification.forging import leaf, rewrite_with_checkpoints_from, set_head

sqlite_alone = pytest.mark.parametrize("databases", ["sqlite"], indirect=True)
"""What only a file, or a database that takes any value in any column, lets somebody do."""


def _named(report: Report) -> tuple[int | None, str | None]:
    assert report.fault is not None
    return report.fault.entry, report.fault.table


def _flipped(raw: bytes, bit: int = 12) -> bytes:
    return raw[: bit // 8] + bytes([raw[bit // 8] ^ (1 << bit % 8)]) + raw[bit // 8 + 1 :]


def _entry(owned: Owned, kind: str) -> int:
    number: int = owned.value("SELECT min(number) FROM history_events WHERE kind = ?", kind)
    return number


# --- the history


@pytest.mark.parametrize("number", [1, 9, 18])
def test_one_bit_of_the_bytes(owned: Owned, number: int) -> None:
    raw = owned.value("SELECT canonical FROM history_events WHERE number = ?", number)
    owned.execute(("UPDATE history_events SET canonical = ? WHERE number = ?", (_flipped(raw), number)))
    assert _named(owned.verify()) == (number, None)


@pytest.mark.parametrize(
    ("column", "value"),
    [
        ("time", "2025-01-01 00:00:00.000000"),
        ("kind", "gains_rejected"),
        ("actor", "somebody"),
        ("loop_id", None),
        ("site", "South"),
        ("tag", "FIC-102"),
        ("area", "Tank farm"),
        ("previous", "0" * 63 + "1"),
    ],
)
def test_a_searchable_column_only(owned: Owned, column: str, value: object) -> None:
    number = _entry(owned, "gains_approved")
    change = f"UPDATE history_events SET {column} = ? WHERE number = ?"  # noqa: S608  our own columns
    owned.execute((change, (value, number)))
    report = owned.verify()
    assert _named(report) == (number, None)
    assert report.fault.what.startswith(f"column {column} says ")  # type: ignore[union-attr]


def test_a_digest_only(owned: Owned) -> None:
    owned.execute(("UPDATE history_events SET digest = ? WHERE number = 9", ("f" * 64,)))
    assert _named(owned.verify()) == (9, None)


def test_an_entry_rewritten_with_its_own_digest_and_not_the_later_ones(owned: Owned) -> None:
    raw = owned.value("SELECT canonical FROM history_events WHERE number = 3")
    forged = raw.replace(b"Colleague", b"Accomplice")
    assert forged != raw
    change = "UPDATE history_events SET canonical = ?, digest = ? WHERE number = 3"
    owned.execute((change, (forged, leaf(forged).hex())))
    report = owned.verify()
    assert _named(report) == (4, None)
    assert "chain is broken" in report.fault.what  # type: ignore[union-attr]


def test_an_entry_in_the_middle_deleted(owned: Owned) -> None:
    owned.execute("DELETE FROM history_events WHERE number = 12")
    report = owned.verify()
    assert _named(report) == (12, None)
    assert "missing" in report.fault.what  # type: ignore[union-attr]


def test_an_entry_in_the_middle_deleted_and_the_later_ones_renumbered(owned: Owned) -> None:
    owned.execute(
        "DELETE FROM history_events WHERE number = 12",
        "UPDATE history_events SET number = number - 1 WHERE number > 12",
    )
    assert _named(owned.verify()) == (12, None)


def test_every_entry_of_one_loop_deleted(owned: Owned) -> None:
    first = owned.value("SELECT min(number) FROM history_events WHERE tag = 'LIC-7'")
    owned.execute("DELETE FROM history_events WHERE tag = 'LIC-7'")
    assert _named(owned.verify()) == (first, None)


def test_two_entries_swapped(owned: Owned) -> None:
    swap = "UPDATE history_events SET number = ? WHERE number = ?"
    owned.execute((swap, (-1, 9)), (swap, (9, 10)), (swap, (10, -1)))
    assert _named(owned.verify()) == (9, None)


def test_an_entry_duplicated_at_the_end(owned: Owned) -> None:
    last = owned.value("SELECT size FROM history_head")
    _append_copy_of(owned, 9, last + 1)
    assert _named(owned.verify()) == (last + 1, None)


def test_an_entry_inserted_in_the_middle(owned: Owned) -> None:
    owned.execute("UPDATE history_events SET number = -number - 1 WHERE number >= 9")
    owned.execute("UPDATE history_events SET number = -number WHERE number < 0")
    _append_copy_of(owned, 8, 9)
    assert _named(owned.verify()) == (9, None)


def _append_copy_of(owned: Owned, number: int, as_number: int) -> None:
    (row,) = owned.rows("SELECT * FROM history_events WHERE number = ?", number)
    names = owned.columns("history_events")
    changed = dict(zip(names, row, strict=True))
    changed |= {"number": as_number, "digest": "e" * 64, "previous": "d" * 64}
    marks = ", ".join("?" for _ in names)
    insert = f"INSERT INTO history_events ({', '.join(names)}) VALUES ({marks})"  # noqa: S608
    owned.execute((insert, tuple(changed.values())))


@pytest.mark.parametrize(
    ("column", "value"),
    [("size", 3), ("digest", "0" * 64), ("right_edge", b""), ("time", "2025-01-01 00:00:00.000000")],
)
def test_the_head_only(owned: Owned, column: str, value: object) -> None:
    owned.execute((f"UPDATE history_head SET {column} = ?", (value,)))  # noqa: S608
    report = owned.verify()
    assert _named(report) == (None, "history_head")
    assert column in report.fault.what  # type: ignore[union-attr]


def test_the_head_removed(owned: Owned) -> None:
    owned.execute("DELETE FROM history_head")
    assert _named(owned.verify()) == (None, "history_head")


def test_the_first_of_two_places_is_named(owned: Owned) -> None:
    owned.execute(
        ("UPDATE history_events SET actor = 'x' WHERE number = 15", ()),
        ("UPDATE history_events SET actor = 'x' WHERE number = 11", ()),
    )
    assert _named(owned.verify()) == (11, None)


# --- what only a checkpoint kept outside finds


def test_the_last_entries_cut_off_with_everything_that_belongs_to_them(owned: Owned) -> None:
    checkpoint = owned.checkpoint()
    _cut(owned, checkpoint.size - 2)
    assert owned.verify().holds, "without a checkpoint a clean cut cannot be seen, and that is said plainly"
    report = owned.verify(checkpoint)
    assert report.fault is not None
    assert f"covers {checkpoint.size} entries" in report.fault.what


def test_everything_taken_out(owned: Owned) -> None:
    checkpoint = owned.checkpoint()
    _cut(owned, 0)
    report = owned.verify()
    assert (report.fault, report.entries, report.rows, report.head) == (None, 0, 0, None)
    assert not owned.verify(checkpoint).holds


@pytest.fixture
def earlier(owned: Owned, databases: Databases) -> Iterator[Owned]:
    """The store as it was after ten entries."""
    earlier = Owned(databases.copy_of(owned.url))
    _cut(earlier, 10)
    yield earlier
    databases.drop(earlier.url)


def test_an_old_copy_of_the_store_put_back(owned: Owned, earlier: Owned) -> None:
    newer = owned.checkpoint()
    assert earlier.verify().holds
    assert not earlier.verify(newer).holds


def test_everything_rewritten_from_an_entry_on(owned: Owned) -> None:
    checkpoint = owned.checkpoint()
    rewrite_with_checkpoints_from(owned, 2, _by_somebody_else)
    assert owned.verify().holds
    report = owned.verify(checkpoint)
    assert report.fault is not None
    assert "rewritten" in report.fault.what


def test_a_checkpoint_with_another_last_entry(owned: Owned) -> None:
    report = owned.verify(replace(owned.checkpoint(), head="0" * 64))
    assert report.fault is not None
    assert "rewritten" in report.fault.what


def test_a_checkpoint_of_an_earlier_time_still_holds(owned: Owned, earlier: Owned) -> None:
    assert owned.verify(earlier.checkpoint()).holds


def _by_somebody_else(entry: dict[str, Any], _root: str, _origin: str) -> None:
    entry["actor"] = "somebody" if entry["number"] == 2 else entry["actor"]


def _cut(owned: Owned, size: int) -> None:
    tables = [name for name in owned.tables() if "event_number" in owned.columns(name)]
    owned.execute(
        *(f"DELETE FROM {table} WHERE event_number > {size}" for table in tables),  # noqa: S608
        f"DELETE FROM history_events WHERE number > {size}",  # noqa: S608
    )
    set_head(owned)


# --- what the entries vouch for


COVERED = {
    "checkpoints": [
        "decision_id",
        "origin",
        "size",
        "digest",
        "head",
        "time",
        "public_key",
        "signature",
    ],
    "loops": ["id", "site", "tag", "site_key", "tag_key"],
    "loop_revisions": [
        "loop_id",
        "revision",
        "area",
        "description",
        "safety_related",
        "content",
        "content_digest",
    ],
    "loop_models": [
        "id",
        "loop_id",
        "version",
        "operating_point",
        "operating_point_key",
        "retired",
        "content",
        "content_digest",
    ],
    "submissions": [
        "id",
        "loop_id",
        "loop_revision",
        "kind",
        "reason",
        "submitted_by",
        "submitted_by_name",
        "submitted_by_full_name",
        "submitted_at",
        "install_by",
        "temporary_until",
        "verdict",
        "content",
        "content_digest",
    ],
    "submission_authors": ["submission_id", "account_id"],
    "submission_recomputations": [
        "submission_id",
        "ordinal",
        "model_id",
        "gain_set",
        "operating_point",
        "verdict",
        "curves",
        "curves_digest",
    ],
    "submission_states": ["submission_id", "ordinal", "action", "state"],
    "gains_in_force": ["loop_id", "ordinal", "submission_id", "since"],
    "decisions": [
        "id",
        "submission_id",
        "ordinal",
        "decision",
        "decided_by",
        "decided_at",
        "submission_digest",
        "content",
        "content_digest",
    ],
    "installations": [
        "id",
        "submission_id",
        "ordinal",
        "recorded_by",
        "recorded_at",
        "as_approved",
        "content",
        "content_digest",
    ],
    "sheets": ["decision_id", "submission_id", "renderer", "content", "content_digest"],
    "loop_changes": [
        "id",
        "loop_id",
        "loop_revision",
        "retires_model_id",
        "proposed_by",
        "proposed_at",
        "content",
        "content_digest",
    ],
    "loop_change_decisions": [
        "change_id",
        "decision",
        "decided_by",
        "decided_at",
        "change_digest",
        "content",
        "content_digest",
    ],
    "submission_contents": [
        "submission_id",
        "version",
        "change_id",
        "first_recomputation",
        "verdict",
        "content",
        "content_digest",
    ],
    "rechecks_due": ["change_id", "submission_id"],
    "change_checkpoints": [
        "change_id",
        "origin",
        "size",
        "digest",
        "head",
        "time",
        "public_key",
        "signature",
    ],
}
"""Every column of every kept table but the one that ties a row to its entry."""

OF_A_KEY = ("public_key", "signature")
"""Empty in a store that has no key; `test_kept_checkpoints.py` tries them in one that has."""

EVERY_COLUMN = [
    (table, column) for table, columns in COVERED.items() for column in columns if column not in OF_A_KEY
]


def test_the_list_above_is_all_there_is(owned: Owned) -> None:
    found = {
        table: owned.columns(table) for table in owned.verify().covered if not table.startswith("history_")
    }
    without_tie = {
        table: [column for column in columns if column != "event_number"] for table, columns in found.items()
    }
    assert without_tie == COVERED


@pytest.mark.parametrize(("table", "column"), EVERY_COLUMN)
def test_any_column_of_any_kept_row_changed(owned: Owned, table: str, column: str) -> None:
    rowid, number, value = owned.rows(
        f"SELECT {owned.row_id}, event_number, {column} FROM {table}"  # noqa: S608
        f" WHERE {column} IS NOT NULL ORDER BY event_number LIMIT 1"
    )[0]
    change = f"UPDATE {table} SET {column} = ? WHERE {owned.row_id} = ?"  # noqa: S608
    owned.execute((change, (_other(column, value), rowid)))
    report = owned.verify()
    assert _named(report) == (number, table)


def _other(column: str, value: Any) -> Any:
    if isinstance(value, bytes):
        return _flipped(value)
    if isinstance(value, bool):
        return not value
    if isinstance(value, datetime):
        return value.replace(year=2025)
    if isinstance(value, int):
        return 1 - value if column in ("safety_related", "retired", "as_approved") else value + 7
    if column.endswith("_at") or column in ("install_by", "temporary_until", "since"):
        return value.replace("2026", "2025")
    return value[:-1] + ("x" if value[-1] != "x" else "y")


@pytest.mark.parametrize("table", [table for table in COVERED if table not in ("sheets",)])
def test_any_kept_row_deleted(owned: Owned, table: str) -> None:
    first = f"SELECT {owned.row_id}, event_number FROM {table} ORDER BY event_number LIMIT 1"  # noqa: S608
    rowid, number = owned.rows(first)[0]
    owned.execute((f"DELETE FROM {table} WHERE {owned.row_id} = ?", (rowid,)))  # noqa: S608
    report = owned.verify()
    assert _named(report) == (number, table)
    assert "missing" in report.fault.what  # type: ignore[union-attr]


@pytest.mark.parametrize(("tie", "entry"), [(9, 9), (10_000, None), (0, None)])
def test_a_row_added_that_no_entry_knows(owned: Owned, tie: int, entry: int | None) -> None:
    insert = "INSERT INTO submission_authors (submission_id, account_id, event_number) VALUES (?, ?, ?)"
    owned.execute((insert, ("a" * 32, "b" * 32, tie)))
    report = owned.verify()
    assert _named(report) == (entry, "submission_authors")
    assert report.fault is not None
    assert report.fault.row == f"submission_id {'a' * 32}, account_id {'b' * 32}"


@sqlite_alone
def test_a_row_tied_to_what_is_no_number(owned: Owned) -> None:
    owned.execute("UPDATE submission_authors SET event_number = 'x'")
    assert _named(owned.verify()) == (None, "submission_authors")


def test_a_signature_moved_to_another_submission(owned: Owned) -> None:
    rejected = owned.value("SELECT submission_id FROM decisions WHERE decision = 'reject'")
    number, moved = owned.rows(
        "SELECT event_number, id FROM decisions WHERE decision = 'approve' ORDER BY event_number"
    )[0]
    owned.execute(("UPDATE decisions SET submission_id = ?, ordinal = 9 WHERE id = ?", (rejected, moved)))
    report = owned.verify()
    assert _named(report) == (number, "decisions")


def test_a_signature_moved_to_another_entry(owned: Owned) -> None:
    number = owned.value("SELECT min(event_number) FROM decisions WHERE decision = 'approve'")
    owned.execute("UPDATE decisions SET event_number = event_number + 1 WHERE decision = 'approve'")
    assert _named(owned.verify()) == (number, "decisions")


@pytest.mark.parametrize("with_digest", [False, True])
@pytest.mark.parametrize("part", ["limit", "result"])
def test_a_limit_or_a_result_of_a_past_recomputation_changed(
    owned: Owned, part: str, with_digest: bool
) -> None:
    first = f"SELECT {owned.row_id}, event_number, content, content_digest FROM submissions"  # noqa: S608
    first += " ORDER BY event_number"
    rowid, number, raw, stored = owned.rows(first)[0]
    content = json.loads(raw)
    recomputation = content["recomputations"][0]
    if part == "limit":
        recomputation["criteria"]["gain_margin_min"] = 1.0
    else:
        recomputation["answer"]["continuous"]["margins"]["gain_margin"] = 9.9
    forged = json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()
    assert forged != raw
    digest = hashlib.sha256(forged).hexdigest() if with_digest else stored
    change = f"UPDATE submissions SET content = ?, content_digest = ? WHERE {owned.row_id} = ?"  # noqa: S608
    owned.execute((change, (forged, digest, rowid)))
    assert _named(owned.verify()) == (number, "submissions")


def test_a_table_removed(owned: Owned) -> None:
    owned.execute("DROP TABLE decisions" if is_sqlite(owned.url) else "DROP TABLE decisions CASCADE")
    report = owned.verify()
    assert _named(report) == (_entry(owned, "gains_approved"), "decisions")


@sqlite_alone
def test_a_text_in_a_numbers_place(owned: Owned) -> None:
    number = owned.value("SELECT event_number FROM loop_models LIMIT 1")
    owned.execute("UPDATE loop_models SET version = CAST(version AS BLOB) WHERE version = 1")
    assert _named(owned.verify())[0] == number


@sqlite_alone
def test_a_number_that_is_neither_false_nor_true(owned: Owned) -> None:
    number = owned.value("SELECT min(event_number) FROM installations WHERE as_approved")
    owned.execute("UPDATE installations SET as_approved = 2 WHERE as_approved = 1")
    assert _named(owned.verify()) == (number, "installations")


# --- the file


@sqlite_alone
def test_a_row_that_breaks_a_constraint_where_no_entry_says_so(owned: Owned) -> None:
    """The entries know nothing of working tables, but the database's own check looks at every one."""
    owned.execute("UPDATE account_roles SET role = 'owner' WHERE role = 'auditor'")
    report = owned.verify()
    assert report.fault is not None
    assert "account_roles" in report.fault.what


@sqlite_alone
def test_bytes_of_the_file_edited(owned: Owned) -> None:
    file = file_of(owned.url)
    raw = file.read_bytes()
    place = raw.index(b'"kind":"gains_approved"')
    file.write_bytes(raw[:place] + b'"kind":"gains_rejected"' + raw[place + 23 :])
    assert not owned.verify().holds


def test_a_file_that_is_no_store(tmp_path: Path) -> None:
    file = tmp_path / "other.db"
    file.write_bytes(b"not a database at all" * 100)
    report = Owned(f"sqlite:///{file}").verify()
    assert report.fault is not None
    assert report.fault.sentence() == "the store: the store cannot be read: file is not a database"


def test_an_address_of_no_database() -> None:
    report = Owned("nonsense:///store.db").verify()
    assert report.fault is not None
    assert report.fault.what.startswith("the store cannot be read: ")
