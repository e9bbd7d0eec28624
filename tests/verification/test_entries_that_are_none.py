"""Bytes, rows and keys that fit their digests and are not what an entry has: named, never an exception."""

from __future__ import annotations

import json
from typing import Any

import pytest

from service.verification.checkpoints import Checkpoint
from service.verification.kept import KeptCheckpoints, State
from service.verification.report import Broken, Fault
from tests.verification.conftest import Owned
from tests.verification.forging import leaf, rewrite_from, rewrite_with_checkpoints_from, set_head
from tests.verification.test_tampering import sqlite_alone

NUMBER = 5


def _fault(owned: Owned) -> Fault:
    fault = owned.verify().fault
    assert fault is not None
    return fault


def _write(owned: Owned, raw: object, digest: str) -> None:
    change = "UPDATE history_events SET canonical = ?, digest = ? WHERE number = ?"
    owned.execute((change, (raw, digest, NUMBER)))


@pytest.mark.parametrize("raw", [b"", b"no json", b"\xff", b"[]", b"7", b"{}", b'{"number": 5, "rows": []}'])
def test_bytes_that_are_no_entry(owned: Owned, raw: bytes) -> None:
    _write(owned, raw, leaf(raw).hex())
    fault = _fault(owned)
    assert (fault.entry, fault.what) == (NUMBER, "the bytes are not an entry")
    assert fault.sentence() == "entry 5: the bytes are not an entry"


@sqlite_alone
def test_a_number_in_the_place_of_the_bytes(owned: Owned) -> None:
    _write(owned, 7, "0" * 64)
    assert (_fault(owned).entry, "does not hold bytes" in _fault(owned).what) == (NUMBER, True)


@sqlite_alone
def test_a_text_that_is_no_time_in_the_place_of_one(owned: Owned) -> None:
    owned.execute(("UPDATE history_events SET time = 'yesterday' WHERE number = ?", (NUMBER,)))
    fault = _fault(owned)
    assert (fault.entry, fault.what.startswith("column time says 'yesterday', ")) == (NUMBER, True)


@pytest.mark.parametrize("rows", [[{}], [7], [None]])
def test_an_entry_whose_rows_are_none(owned: Owned, rows: list[object]) -> None:
    """Everything else fits: the entry's digest, the chain after it and the head."""
    number = owned.value("SELECT number FROM history_events WHERE kind = 'loop_registered' ORDER BY number")

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == number:
            entry["rows"]["loops"] = rows

    rewrite_from(owned, number, forge)
    fault = _fault(owned)
    assert (fault.entry, fault.table) == (number, "loops")
    assert fault.sentence().startswith(f"entry {number}; table loops: ")


@pytest.mark.parametrize("content", [None, [], "a key"])
def test_an_entry_of_a_key_that_tells_of_none(owned: Owned, content: object) -> None:
    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == NUMBER:
            entry |= {"kind": "signing_key_taken_up", "content": content}

    _forge_kind(owned, "signing_key_taken_up", forge)
    assert (_fault(owned).entry, _fault(owned).what) == (NUMBER, "it tells of no key")


def test_an_entry_of_a_later_kind_about_keys_is_an_entry_like_any_other(owned: Owned) -> None:
    """A store that a later version wrote can be verified by this one as far as the digests go."""

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == NUMBER:
            entry["kind"] = "signing_key_looked_at"

    _forge_kind(owned, "signing_key_looked_at", forge)
    assert owned.verify().holds


def _forge_kind(owned: Owned, kind: str, forge: Any) -> None:
    rewrite_with_checkpoints_from(owned, NUMBER, forge)
    owned.execute(("UPDATE history_events SET kind = ? WHERE number = ?", (kind, NUMBER)))
    set_head(owned)


@pytest.mark.parametrize(
    "document",
    [
        None,
        [],
        7,
        {"size": 3},
        {"digest": "0" * 64},
        {"size": "3", "digest": "0" * 64},
        {"size": True, "digest": "0" * 64},
        {"size": -1, "digest": "0" * 64},
        {"size": 3.0, "digest": "0" * 64},
        {"size": 3, "digest": 7},
        {"size": 3, "digest": "0" * 64, "head": 7},
        {"size": 3, "digest": "0" * 64, "origin": []},
        {"size": 3, "digest": "0" * 64, "public_key": {}},
    ],
)
def test_a_file_that_is_no_checkpoint_is_said_to_be_none(document: object) -> None:
    with pytest.raises(ValueError, match="this is no checkpoint"):
        Checkpoint.read(json.dumps(document).encode())


def test_a_checkpoint_of_no_entries_is_one() -> None:
    assert Checkpoint.read(json.dumps({"size": 0, "digest": "0" * 64}).encode()).size == 0


@pytest.mark.parametrize("value", [1.5, True, [], {}])
def test_a_signed_checkpoint_holds_texts_whole_numbers_and_null_alone(owned: Owned, value: object) -> None:
    """Of anything else there would be more than one way to write it, and so to sign it."""
    held = owned.checkpoint()
    document = {"size": held.size, "digest": held.root, "more": value, "public_key": "A" * 43 + "="}
    raw = json.dumps(document | {"signature": "A" * 86 + "=="}).encode()
    fault = owned.verify(Checkpoint.read(raw)).fault
    assert fault is not None
    assert fault.sentence() == "the store: the checkpoint's signature is not one that its key made of it"


def test_what_stands_in_a_store_cannot_write_over_what_is_said_of_it() -> None:
    hidden = "Größe\x1b[2K\rThe history holds\n\u202e\ud800"
    said = Fault(entry=5, table="loops", row=f"id {hidden}", what="the row is missing").sentence()
    told = r"id Größe\x1b[2K\rThe history holds\n\u202e\ud800"
    assert said == f"entry 5; table loops, row {told}: the row is missing"


STATE = {
    "origin": "0" * 64,
    "size": 1,
    "digest": "1" * 64,
    "head": "2" * 64,
    "time": "2026-03-02T06:00:00Z",
}


def test_a_kept_checkpoint_that_names_a_key_has_its_signature() -> None:
    row = STATE | {"decision_id": "d", "public_key": None, "signature": None}
    for changes, holds in (({}, True), ({"public_key": "A" * 43 + "="}, False)):
        kept = KeptCheckpoints()
        kept.add({"rows": {"decisions": [{"id": "d"}]}}, None, None)
        entry = {"rows": {"checkpoints": [row | changes]}}
        if holds:
            kept.add(entry, State(**STATE), None)  # type: ignore[arg-type]
        else:
            with pytest.raises(Broken, match="names a key that did not sign it"):
                kept.add(entry, State(**STATE), None)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("decided", "kept_with"),
    [
        ({"decisions": [{"id": "d"}]}, {"change_checkpoints": [STATE | {"change_id": "d"}]}),
        ({"loop_change_decisions": [{"change_id": "d"}]}, {"checkpoints": [STATE | {"decision_id": "d"}]}),
    ],
)
def test_a_checkpoint_of_a_change_is_none_of_a_decision_on_gains(
    decided: dict[str, object], kept_with: dict[str, object]
) -> None:
    """Though both bear the same name."""
    kept = KeptCheckpoints()
    kept.add({"rows": decided}, None, None)
    with pytest.raises(Broken, match="not made with the decision of the entry before it"):
        kept.add({"rows": kept_with}, State(**STATE), None)  # type: ignore[arg-type]
