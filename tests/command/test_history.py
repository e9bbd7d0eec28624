"""`history verify` on a store that the service made: it holds, and once touched the place is named."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from service.command import history
from service.command.main import main
from service.documents import reading
from service.documents.loops import LoopRegistration
from service.issuing import checkpoints
from service.records import loops, migrating
from service.records.database import Database, system_clock
from service.records.roles import CONSOLE
from service.verification import verifier
from tests.api.plant import LOOP
from tests.databases import Databases, without_guards

Verify = Callable[..., Result]


REPLACED = {
    "sqlite": "CAST(replace(CAST({0} AS TEXT), '{1}', '{2}') AS BLOB)",
    "postgresql": "convert_to(replace(convert_from({0}, 'UTF8'), '{1}', '{2}'), 'UTF8')",
}
"""Other text in a bytes column."""

TOUCHED: dict[str, tuple[str, str]] = {
    "a column that people read": ("UPDATE history_events SET actor = 'somebody' WHERE number = 2", "entry 2"),
    "the bytes": (
        "UPDATE history_events SET canonical = replaced(canonical, TIC-301, TIC-309) WHERE number = 3",
        "entry 3",
    ),
    "an entry taken out": ("DELETE FROM history_events WHERE number = 3", "entry 3"),
    "a row": (
        "UPDATE loop_revisions SET content = replaced(content, 150, 250) WHERE event_number = 2",
        "loop_revisions",
    ),
    "a row taken out": ("DELETE FROM loop_revisions WHERE event_number = 4", "loop_revisions"),
    "the head": ("UPDATE history_head SET right_edge = 'none'", "history_head"),
}
"""What is touched → the statement, and the place that is named."""

TOUCHED_IN_SQLITE: dict[str, tuple[str, str]] = {
    "a text in the bytes' place": (
        "UPDATE history_events SET canonical = replace(canonical, 'TIC-301', 'TIC-309') WHERE number = 3",
        "entry 3",
    ),
    "a row cut loose": (
        "UPDATE loop_revisions SET event_number = 'none' WHERE event_number = 4",
        "loop_revisions",
    ),
}
"""The same, where a column takes any kind of value."""


@pytest.fixture
def url(databases: Databases) -> Iterator[str]:
    """A store with three registered loops."""
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    database = Database.open(url)
    with database.writing() as session:
        for number in range(3):
            document = reading.read(LoopRegistration, LOOP | {"tag": f"TIC-30{number}"})
            loops.register(session, CONSOLE, document, database.now())
    database.close()
    yield url
    databases.drop(url)


@pytest.fixture
def verify(url: str, monkeypatch: pytest.MonkeyPatch) -> Verify:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", url)
    return lambda *arguments: CliRunner().invoke(main, ["history", "verify", *arguments])


def checkpoint_of(url: str, place: Path) -> Path:
    database = Database.open(url)
    with database.reading() as session:
        made = checkpoints.checkpoint(session, None)
    database.close()
    place.write_text(json.dumps({"size": made.size, "digest": made.digest}))
    return place


def test_a_store_that_nobody_touched_holds_and_says_what_is_not_covered(verify: Verify) -> None:
    result = verify()
    assert (result.exit_code, result.stderr) == (0, "")
    assert "The history holds: 4 entries" in result.stdout
    for table in ("accounts", "sessions", "idempotency_keys"):
        assert table in result.stdout.split("Not covered:")[1]


@pytest.mark.parametrize("what", TOUCHED)
def test_a_store_that_was_touched_does_not_hold_and_the_place_is_named(
    url: str, databases: Databases, verify: Verify, what: str
) -> None:
    statement, place = TOUCHED[what]
    written = REPLACED[databases.name]
    pattern = r"replaced\((\w+), ([\w-]+), ([\w-]+)\)"
    without_guards(url, re.sub(pattern, lambda found: written.format(*found.groups()), statement))
    _does_not_hold(verify(), place)


@pytest.mark.parametrize("databases", ["sqlite"], indirect=True)
@pytest.mark.parametrize("what", TOUCHED_IN_SQLITE)
def test_nor_does_one_with_another_kind_of_value(url: str, verify: Verify, what: str) -> None:
    statement, place = TOUCHED_IN_SQLITE[what]
    without_guards(url, statement)
    _does_not_hold(verify(), place)


def _does_not_hold(result: Result, place: str) -> None:
    assert result.exit_code == 1
    assert "does not hold" in result.stderr
    assert place in result.stderr


def test_a_long_verification_tells_how_far_it_is(verify: Verify, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(history, "PROGRESS_EVERY_S", 0.0)
    monkeypatch.setattr(verifier, "PROGRESS_EVERY", 2)
    assert verify().stderr.splitlines() == ["2 of 4 entries verified", "4 of 4 entries verified"]


def test_an_end_that_was_cut_off_is_seen_with_a_checkpoint_held_outside(
    url: str, verify: Verify, tmp_path: Path
) -> None:
    held = checkpoint_of(url, tmp_path / "checkpoint.json")
    assert verify("--checkpoint", str(held)).exit_code == 0
    longer = tmp_path / "longer.json"
    longer.write_text(json.dumps(json.loads(held.read_text()) | {"size": 9}))
    result = verify("--checkpoint", str(longer))
    assert (result.exit_code, "9 entries" in result.stderr) == (1, True)


def test_another_history_than_the_checkpoints_does_not_hold(url: str, verify: Verify, tmp_path: Path) -> None:
    held = checkpoint_of(url, tmp_path / "checkpoint.json")
    other = json.loads(held.read_text()) | {"digest": "0" * 64}
    held.write_text(json.dumps(other))
    assert verify("--checkpoint", str(held)).exit_code == 1


def test_a_file_that_is_no_checkpoint_is_said_in_one_sentence(verify: Verify, tmp_path: Path) -> None:
    (tmp_path / "other.json").write_text("[]")
    result = verify("--checkpoint", str(tmp_path / "other.json"))
    assert result.exit_code == 2
    assert result.stderr.count("\n") == 1


@pytest.fixture
def exported(verify: Verify, tmp_path: Path) -> Path:
    place = tmp_path / "export.jsonl"
    assert CliRunner().invoke(main, ["history", "export", str(place)]).exit_code == 0
    return place


def test_an_export_is_verified_without_the_store(
    url: str, databases: Databases, verify: Verify, exported: Path, tmp_path: Path
) -> None:
    held = checkpoint_of(url, tmp_path / "checkpoint.json")
    whole = verify()
    databases.drop(url)
    result = verify("--export", str(exported), "--checkpoint", str(held))
    assert result.exit_code == 0, result.stderr
    for line in ("Last digest", "Merkle root"):
        assert [text for text in result.stdout.splitlines() if line in text] == [
            text for text in whole.stdout.splitlines() if line in text
        ]


@pytest.mark.parametrize("what", ["changed", "taken out", "swapped", "cut off", "no entry"])
def test_an_export_that_was_touched_does_not_hold(
    url: str, verify: Verify, exported: Path, tmp_path: Path, what: str
) -> None:
    held = checkpoint_of(url, tmp_path / "checkpoint.json")
    one, two, three, four = exported.read_text("utf-8").splitlines()
    lines, place = {
        "changed": ([one, two, three.replace("TIC-301", "TIC-309"), four], "entry 3"),
        "taken out": ([one, two, four], "entry 3"),
        "swapped": ([one, three, two, four], "entry 2"),
        "cut off": ([one, two, three], "covers 4 entries"),
        "no entry": ([one, "[]", three, four], "entry 2"),
    }[what]
    exported.write_text("\n".join(lines) + "\n", "utf-8")
    result = verify("--export", str(exported), "--checkpoint", str(held))
    assert result.exit_code == 1
    assert place in result.stderr
