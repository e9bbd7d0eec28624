"""What stands in a line of the log, and what never does."""

from __future__ import annotations

import json
import logging
from typing import Any

import pytest
from sqlalchemy import text
from sqlalchemy.exc import IntegrityError

from service.monitoring.logs import JsonLines, TextLines, to_standard_error
from service.records import migrating
from service.records.database import Database, system_clock
from tests.databases import Databases


def record(message: str, **more: Any) -> logging.LogRecord:
    logger = logging.getLogger("service.tests")
    return logger.makeRecord(logger.name, logging.INFO, __file__, 1, message, (), None, extra=more)


def test_a_line_is_one_json_object_with_what_was_given_beside_the_message() -> None:
    told = json.loads(JsonLines().format(record("request", status=201, account="maud")))
    assert told.pop("time").endswith("+00:00")
    assert told == {
        "level": "info",
        "logger": "service.tests",
        "message": "request",
        "status": 201,
        "account": "maud",
    }


@pytest.mark.parametrize("formatter", [JsonLines(), TextLines()], ids=["json", "text"])
def test_what_is_given_can_neither_end_the_line_nor_steer_a_terminal(formatter: logging.Formatter) -> None:
    line = formatter.format(record("request", account='a"\n{"level": "error"}\r\x1b[2J\u2028'))
    assert line.isprintable()


@pytest.fixture
def failed(databases: Databases) -> logging.LogRecord:
    """A real failure of a statement that carried the hash of a password."""
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    database = Database.open(url)
    row = {"id": "1", "name": "maud", "full_name": "Maud", "hash": "hash-of-a-password", "at": "2026-03-02"}
    insert = text(
        "INSERT INTO accounts (id, name, full_name, password_hash, created_at)"
        " VALUES (:id, :name, :full_name, :hash, :at)"
    )
    try:
        with database.writing() as session:
            session.execute(insert, row)
            with pytest.raises(IntegrityError) as raised:
                session.execute(insert, row)
    finally:
        database.close()
        databases.drop(url)
    made = record("request failed")
    made.exc_info = (type(raised.value), raised.value, raised.value.__traceback__)
    return made


@pytest.mark.parametrize("formatter", [JsonLines(), TextLines()], ids=["json", "text"])
def test_a_failed_statement_is_told_without_what_it_carried(
    failed: logging.LogRecord, formatter: logging.Formatter
) -> None:
    line = formatter.format(failed)
    assert "IntegrityError" in line
    assert "accounts" in line
    assert "hash-of-a-password" not in line
    assert "maud" not in line


def test_what_weighs_less_than_was_asked_for_is_left_out(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    root = logging.getLogger()
    monkeypatch.setattr(root, "handlers", [])
    monkeypatch.setattr(root, "level", root.level)
    to_standard_error("warning", "json")
    logging.getLogger("service.tests").info("light")
    logging.getLogger("service.tests").warning("heavy")
    (line,) = capsys.readouterr().err.splitlines()
    assert json.loads(line)["message"] == "heavy"
