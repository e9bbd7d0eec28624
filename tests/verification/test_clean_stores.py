"""A store that nobody tampered with never alarms."""

from __future__ import annotations

import ast
import sqlite3
import subprocess
import time
from datetime import datetime, timedelta, timezone
from pathlib import Path

import pytest
from sqlalchemy import text
from sqlalchemy.exc import DBAPIError

from service.records import accounts, history
from service.records.roles import CONSOLE
from service.verification.store import EVENTS, as_time, count, opened
from service.verification.verifier import Checkpoint
from tests.clusters import program
from tests.databases import Databases, file_of, is_sqlite
from tests.records.store import Store, gains
from tests.verification.conftest import Owned


def test_a_clean_store_holds_and_the_report_says_how_much_was_verified(owned: Owned) -> None:
    report = owned.verify()
    assert report.holds
    assert report.entries == owned.value("SELECT count(*) FROM history_events")
    assert report.head == owned.value("SELECT digest FROM history_head")
    covered = [table for table in report.covered if not table.startswith("history_")]
    assert report.rows == sum(owned.value(f"SELECT count(*) FROM {table}") for table in covered)  # noqa: S608
    assert report.notes == ()


def test_the_report_lists_the_tables_that_nothing_vouches_for(owned: Owned) -> None:
    assert owned.verify().not_covered == (
        "account_areas",
        "account_roles",
        "accounts",
        "alembic_version",
        "idempotency_keys",
        "sign_in_sessions",
        "throttles",
        "tokens",
    )


def test_the_root_is_the_one_that_the_service_gives_out(owned: Owned) -> None:
    store = Store(owned.url)
    with store.database.reading() as session:
        assert owned.verify().root == history.head(session).root
    store.database.close()


def test_a_changed_name_of_a_person_is_no_tampering(owned: Owned) -> None:
    store = Store(owned.url)
    with store.database.writing() as session:
        accounts.rename(session, CONSOLE, "reviewer", "Another Name", "married", store.clock())
    store.database.close()
    assert owned.verify().holds


def test_a_store_in_use_is_verified_as_it_was_when_the_reading_began(owned: Owned) -> None:
    store = Store(owned.url)
    with store.database.writing() as session:
        accounts.rename(session, CONSOLE, "reviewer", "Another Name", "married", store.clock())
        assert owned.verify().holds
    store.database.close()


def test_a_dump_loaded_into_another_database_holds(owned: Owned, databases: Databases) -> None:
    checkpoint = owned.checkpoint()
    loaded = Owned(databases.new())
    if is_sqlite(owned.url):
        source, target = sqlite3.connect(file_of(owned.url)), sqlite3.connect(file_of(loaded.url))
        target.executescript("\n".join(source.iterdump()))
        source.close()
        target.close()
    else:
        old, new = (url.replace("+psycopg", "") for url in (owned.url, loaded.url))
        dump = subprocess.run([program("pg_dump"), old], check=True, capture_output=True)
        load = [program("psql"), "--quiet", "--set=ON_ERROR_STOP=1", new]
        subprocess.run(load, check=True, input=dump.stdout, capture_output=True)
    assert loaded.verify(checkpoint).holds
    databases.drop(loaded.url)


def test_a_store_that_was_made_compact_holds(owned: Owned) -> None:
    owned.execute("VACUUM")
    assert owned.verify().holds


def test_a_clock_that_was_set_back_is_a_note_and_no_fault(owned: Owned) -> None:
    store = Store(owned.url)
    store.clock.now -= timedelta(days=30)
    with store.database.writing() as session:
        accounts.rename(session, CONSOLE, "reviewer", "Another Name", "married", store.clock())
    store.database.close()
    report = owned.verify()
    assert report.holds
    assert len(report.notes) == 1
    assert "set back" in report.notes[0]


def test_a_text_that_looks_like_a_time_is_a_text(owned: Owned) -> None:
    store = Store(owned.url)
    store.submit(reason="2026-03-02", controller=gains(1.3))
    store.database.close()
    assert owned.verify().holds


@pytest.mark.parametrize(
    ("stored", "told"),
    [
        (datetime(2026, 3, 2, 6, 0), "2026-03-02T06:00:00Z"),
        (datetime(2026, 3, 2, 11, 30, tzinfo=timezone(timedelta(hours=5.5))), "2026-03-02T06:00:00Z"),
        ("2026-03-02 06:00:00.000001", "2026-03-02T06:00:00.000001Z"),
        ("yesterday", "yesterday"),
        (7, 7),
        (None, None),
    ],
)
def test_a_stored_time_is_told_in_utc_wherever_the_verification_runs(
    monkeypatch: pytest.MonkeyPatch, stored: object, told: object
) -> None:
    monkeypatch.setenv("TZ", "Asia/Kolkata")
    time.tzset()
    found = as_time(stored)
    monkeypatch.undo()
    time.tzset()
    assert found == told


def test_a_checkpoint_is_read_as_the_service_gives_it_out() -> None:
    raw = b'{"origin": "x", "size": 3, "digest": "ab", "head": "cd", "time": "t", "signature": null}'
    read = Checkpoint.read(raw)
    assert (read.size, read.root, read.origin, read.head) == (3, "ab", "x", "cd")
    assert not read.is_signed


@pytest.mark.parametrize(
    "raw",
    [b"", b"[]", b'{"size": 3}', b'{"size": "many", "digest": "ab"}', b'{"size": 1, "digest": 2}'],
)
def test_what_is_no_checkpoint_is_refused(raw: bytes) -> None:
    with pytest.raises(ValueError, match="no checkpoint"):
        Checkpoint.read(raw)


def test_progress_is_told_now_and_then(owned: Owned, monkeypatch: pytest.MonkeyPatch) -> None:
    from service.verification import verifier  # noqa: PLC0415  its constant is changed for this test

    told: list[tuple[int, int]] = []
    monkeypatch.setattr(verifier, "PROGRESS_EVERY", 5)
    verifier.verify(owned.url, progress=lambda done, total: told.append((done, total)))
    total = owned.value("SELECT count(*) FROM history_events")
    assert told == [(done, total) for done in range(5, total + 1, 5)]
    assert verifier.verify(owned.url).holds, "nobody has to ask for it"


def test_a_store_is_opened_for_reading_alone(owned: Owned) -> None:
    change = text("UPDATE accounts SET full_name = 'x'")
    with opened(owned.url) as connection, pytest.raises(DBAPIError, match=r"read-?only"):
        connection.execute(change)


def test_all_that_is_read_of_a_store_is_of_one_moment(owned: Owned) -> None:
    store = Store(owned.url)
    with opened(owned.url) as connection:
        before = count(connection, EVENTS)
        with store.database.writing() as session:
            accounts.rename(session, CONSOLE, "reviewer", "Another Name", "married", store.clock())
        assert count(connection, EVENTS) == before
    with opened(owned.url) as connection:
        assert count(connection, EVENTS) == before + 1
    store.database.close()


def test_the_verifier_shares_no_code_with_what_it_verifies() -> None:
    folder = Path(__file__).parents[2] / "service" / "verification"
    for file in folder.glob("*.py"):
        for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
            if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("service"):
                assert (node.module or "").startswith("service.verification")
