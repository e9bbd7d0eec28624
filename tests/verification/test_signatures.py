"""Signed checkpoints and the keys that follow on each other, as somebody who trusts nobody checks them."""

from __future__ import annotations

import base64
import json
from collections.abc import Callable, Iterator
from typing import Any

import pytest
import rfc8785
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from sqlalchemy.orm import Session

from service.documents import writing
from service.documents.canonical import canonical_bytes
from service.issuing import checkpoints, signing_keys
from service.issuing.base64_text import base64_text, public_text
from service.records.errors import Conflict, NotAllowed, StoreNotUsable
from service.records.roles import CONSOLE
from service.verification import signatures
from service.verification.checkpoints import Checkpoint
from service.verification.verifier import verify
from tests.records.store import Store
from tests.verification.conftest import Owned
from tests.verification.forging import rewrite_from

FIRST, SECOND, THIRD, STRANGE = (Ed25519PrivateKey.generate() for _ in range(4))


@pytest.fixture
def store(owned: Owned) -> Iterator[Store]:
    store = Store(owned.url)
    store.clock.forward(days=1)
    yield store
    store.database.close()


@pytest.fixture
def signed(store: Store) -> Store:
    """A store whose history knows its first key."""
    signing_keys.take_up(store.database, FIRST)
    return store


def checkpoint_of(store: Store, key: Ed25519PrivateKey) -> bytes:
    with store.database.reading() as session:
        return writing.to_bytes(checkpoints.checkpoint(session, key))


def change(store: Store, previous: Ed25519PrivateKey | None, new: Ed25519PrivateKey) -> None:
    with store.database.writing() as session:
        signing_keys.change(session, CONSOLE, previous=previous, new=new, reason="yearly", now=store.clock())


def what_breaks(store: Store, raw: bytes, held_key: str | None = None) -> str | None:
    report = verify(store.url, checkpoint=Checkpoint.read(raw), held_key=held_key)
    return report.fault.what if report.fault else None


def test_a_signed_checkpoint_of_a_known_key_holds_without_a_note(signed: Store) -> None:
    report = verify(signed.url, checkpoint=Checkpoint.read(checkpoint_of(signed, FIRST)))
    assert (report.fault, report.notes) == (None, ())


@pytest.mark.parametrize("name", ["origin", "size", "digest", "head", "time", "public_key"])
def test_no_part_of_a_signed_checkpoint_can_be_changed(signed: Store, name: str) -> None:
    document = json.loads(checkpoint_of(signed, FIRST))
    forged = document | {name: document[name] - 1 if name == "size" else document[name][:-2] + "00"}
    assert what_breaks(signed, json.dumps(forged).encode()) is not None


@pytest.mark.parametrize(
    "signature", ["", "AAAA", "no base64 at all", 7, base64.b64encode(bytes(64)).decode()]
)
def test_a_signature_that_is_none_does_not_hold(signed: Store, signature: object) -> None:
    document = json.loads(checkpoint_of(signed, FIRST)) | {"signature": signature}
    assert "signature" in (what_breaks(signed, json.dumps(document).encode()) or "")


def test_a_checkpoint_signed_with_another_key_does_not_hold(signed: Store) -> None:
    with signed.database.reading() as session:
        honest = checkpoints.checkpoint(session, FIRST)
    document = writing.plain(honest)
    assert isinstance(document, dict)
    document |= {"public_key": public_text(STRANGE)}
    del document["signature"]
    signature = base64.b64encode(STRANGE.sign(canonical_bytes(document))).decode()
    raw = json.dumps(document | {"signature": signature}).encode()
    assert "another key" in (what_breaks(signed, raw) or "")


def test_everything_rewritten_and_signed_with_another_key(signed: Store, owned: Owned) -> None:
    held = checkpoint_of(signed, FIRST)

    def with_another_key(entry: dict[str, Any], root: str, origin: str) -> None:
        if entry["kind"] != signing_keys.TAKEN_UP:
            return
        statement = {
            "purpose": "signing key",
            "origin": origin,
            "size": entry["number"] - 1,
            "digest": root,
            "previous_key": None,
            "public_key": public_text(STRANGE),
        }
        signature = base64.b64encode(STRANGE.sign(canonical_bytes(statement))).decode()  # type: ignore[arg-type]
        entry["content"] |= {"public_key": public_text(STRANGE), "signature": signature}

    rewrite_from(owned, 2, with_another_key)
    forged = checkpoint_of(signed, STRANGE)
    assert json.loads(forged)["signature"] is not None
    assert what_breaks(signed, forged) is None, (
        "whoever holds nothing cannot see it, and that is said plainly"
    )
    assert "rewritten" in (what_breaks(signed, held) or "")
    assert "does not know the key" in (what_breaks(signed, forged, public_text(FIRST)) or "")


def test_a_change_of_the_key_is_followed_from_the_old_one_to_the_new(signed: Store) -> None:
    before = checkpoint_of(signed, FIRST)
    change(signed, FIRST, SECOND)
    change(signed, SECOND, THIRD)
    kind, actor, content = signed.last_entry()
    assert (kind, actor, content["reason"]) == ("signing_key_changed", "console", "yearly")
    after = checkpoint_of(signed, THIRD)
    for raw in (before, after):
        assert what_breaks(signed, raw, public_text(FIRST)) is None
    assert what_breaks(signed, after, public_text(STRANGE)) is not None


def test_the_old_key_signs_nothing_after_the_change(signed: Store) -> None:
    change(signed, FIRST, SECOND)
    assert json.loads(checkpoint_of(signed, FIRST))["signature"] is None


def test_a_key_that_was_lost_is_replaced_and_every_verification_says_so(signed: Store) -> None:
    change(signed, None, SECOND)
    after = checkpoint_of(signed, SECOND)
    report = verify(signed.url, checkpoint=Checkpoint.read(after))
    assert report.holds
    assert "did not confirm" in report.notes[0]
    assert report.signatures[1].endswith(
        f"takes up the key {public_text(SECOND)}, which signed it; the key before it did not"
    )
    assert what_breaks(signed, after, public_text(SECOND)) is None, "whoever holds the new one may follow it"
    assert "does not follow" in (what_breaks(signed, after, public_text(FIRST)) or "")


def test_a_change_that_cannot_be_is_refused(signed: Store) -> None:
    with pytest.raises(Conflict, match="not the present one"):
        change(signed, STRANGE, SECOND)
    with pytest.raises(Conflict, match="already"):
        change(signed, FIRST, FIRST)
    with signed.database.writing() as session, pytest.raises(NotAllowed):
        signing_keys.change(
            session, signed.actor("auditor"), previous=FIRST, new=SECOND, reason="x", now=signed.clock()
        )


def test_a_store_without_a_key_has_none_to_change(store: Store) -> None:
    with pytest.raises(Conflict, match="no signing key yet"):
        change(store, FIRST, SECOND)


def test_a_key_is_taken_up_once_and_another_is_not(signed: Store) -> None:
    before = signed.events()
    signing_keys.take_up(signed.database, FIRST)
    assert signed.events() == before
    with pytest.raises(StoreNotUsable, match="key change"):
        signing_keys.take_up(signed.database, STRANGE)


def _taken_up_meanwhile(store: Store, key: Ed25519PrivateKey, monkeypatch: pytest.MonkeyPatch) -> None:
    """Let another process take up a key just after this one has found none."""
    present = signing_keys.present

    def found_none(session: Session) -> str | None:
        found = present(session)
        monkeypatch.undo()
        signing_keys.take_up(store.database, key)
        return found

    monkeypatch.setattr(signing_keys, "present", found_none)


def test_two_processes_that_start_at_once_take_up_one_key(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    _taken_up_meanwhile(store, FIRST, monkeypatch)
    signing_keys.take_up(store.database, FIRST)
    assert store.events().count(signing_keys.TAKEN_UP) == 1


def test_of_two_processes_with_two_keys_that_start_at_once_one_does_not_start(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    _taken_up_meanwhile(store, SECOND, monkeypatch)
    with pytest.raises(StoreNotUsable, match="key change"):
        signing_keys.take_up(store.database, FIRST)
    assert store.events().count(signing_keys.TAKEN_UP) == 1


Forge = Callable[[dict[str, Any]], None]


@pytest.mark.parametrize(
    ("name", "value", "says"),
    [
        ("signature", None, "the new key did not sign"),
        ("previous_signature", "AAAA", "the key before did not sign"),
        ("previous_key", None, "follows on"),
        ("public_key", public_text(STRANGE), "the new key did not sign"),
    ],
    # the key is made for the test, and every worker must call the test by one name
    ids=["no signature", "another signature", "no key before", "another key"],
)
def test_an_entry_of_a_key_that_its_keys_did_not_sign(
    signed: Store, owned: Owned, name: str, value: object, says: str
) -> None:
    change(signed, FIRST, SECOND)
    number = owned.value("SELECT number FROM history_events WHERE kind = ?", signing_keys.CHANGED)

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == number:
            entry["content"][name] = value

    rewrite_from(owned, number, forge)
    report = owned.verify()
    assert report.fault is not None
    assert (report.fault.entry, says in report.fault.what) == (number, True)


def test_an_unsigned_checkpoint_is_a_note(store: Store) -> None:
    with store.database.reading() as session:
        raw = writing.to_bytes(checkpoints.checkpoint(session, None))
    report = verify(store.url, checkpoint=Checkpoint.read(raw))
    assert report.holds
    assert "unsigned" in report.notes[0]


def test_a_signed_checkpoint_of_a_history_that_knows_no_key_is_a_note(store: Store) -> None:
    report = verify(store.url, checkpoint=Checkpoint.read(checkpoint_of(store, FIRST)))
    assert report.holds
    assert "knows no signing key" in report.notes[0]


def test_a_checkpoint_of_another_store_does_not_hold(signed: Store) -> None:
    document = json.loads(checkpoint_of(signed, FIRST))
    other = {name: document[name] for name in ("size", "digest", "head")} | {"origin": "0" * 64}
    assert "another store" in (what_breaks(signed, json.dumps(other).encode()) or "")


def test_a_signature_is_of_the_canonical_bytes_in_whatever_script() -> None:
    """RFC 8785 keeps letters as they are, in UTF-8, and puts names in order."""
    document = {"size": 3, "origin": "Größe 流", "head": None}
    signature = base64_text(FIRST.sign(rfc8785.dumps(document)))
    assert signatures.holds(public_text(FIRST), signature, document)
    assert not signatures.holds(public_text(STRANGE), signature, document)


def test_a_signature_or_key_with_anything_more_in_it_is_another_text_and_none() -> None:
    signature, key = base64_text(FIRST.sign(b"{}")), public_text(FIRST)
    assert signatures.holds(key, signature, {})
    for more in ("\n", " ", "!", "AAAA"):
        assert not signatures.holds(key, signature + more, {})
        assert not signatures.holds(key + more, signature, {})
