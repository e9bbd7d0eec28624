"""The checkpoints that are kept with decisions, in a store whose owner knows the design and has no key."""

from __future__ import annotations

import base64
import json
from collections.abc import Callable, Iterator
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

from service.documents import writing
from service.documents.canonical import canonical_bytes
from service.issuing import changes, checkpoints, signing_keys
from service.issuing.base64_text import public_text
from service.records import full_export, kept_sheets, loops, migrating
from service.records.roles import CONSOLE
from service.records.views import LoopView, SubmissionView
from service.verification.checkpoints import Checkpoint
from service.verification.export import verify_export
from service.verification.report import Report
from service.verification.verifier import verify
from tests.databases import Databases
from tests.records.store import START, WIDER, Store, gains
from tests.verification.conftest import Owned
from tests.verification.forging import CHECKPOINTS, rewrite_from, rewrite_with_checkpoints_from

FIRST, SECOND, STRANGE = (Ed25519PrivateKey.generate() for _ in range(3))

Row = dict[str, Any]


def sign(store: Store, decision: str, submission: SubmissionView, key: Ed25519PrivateKey | None) -> None:
    """Decide, and keep a checkpoint with the decision."""
    made = store.decide(submission, decision)
    with store.database.writing() as session:
        checkpoint = checkpoints.checkpoint(session, key)
        reviewer, decision_id = store.actor("reviewer"), made.decision.decision_id
        kept_sheets.keep(session, reviewer, decision_id, b"%PDF", "1", checkpoint, store.clock())


def confirm(store: Store, loop: LoopView, key: Ed25519PrivateKey | None, revision: int = 1) -> None:
    """Confirm a change of a loop, and keep a checkpoint with the confirmation."""
    change = store.propose(loop, revision=revision, pv=WIDER | {"high": 200.0 + revision})
    prepared, reviewer = store.prepare_decision(change), store.actor("reviewer")
    with store.database.writing() as session:
        changes.sign(session, reviewer, change.id, prepared, store.clock(), key)


@pytest.fixture(scope="module")
def lived_in(databases: Databases) -> Iterator[str]:
    """Decisions on gains and on a loop: one of each from before checkpoints were kept, one on gains before
    there was a key, two on gains by each of two keys, one on the loop by the second.
    """
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    store.add_people()
    store.add_model(loop := store.register())
    store.decide(store.submit(), "reject")
    store.decide_change(store.propose(loop), "reject")
    sign(store, "reject", store.submit(), None)
    signing_keys.take_up(store.database, FIRST)
    sign(store, "approve", store.submit(), FIRST)
    sign(store, "reject", store.submit(controller=gains(1.2)), FIRST)
    with store.database.writing() as session:
        signing_keys.change(session, CONSOLE, previous=FIRST, new=SECOND, reason="yearly", now=store.clock())
    sign(store, "reject", store.submit(controller=gains(1.3)), SECOND)
    sign(store, "reject", store.submit(controller=gains(1.1)), SECOND)
    confirm(store, loop, SECOND)
    store.register(tag="LIC-7")
    store.database.close()
    yield url
    databases.drop(url)


@pytest.fixture
def owned(lived_in: str, databases: Databases) -> Iterator[Owned]:
    owned = Owned(databases.copy_of(lived_in))
    yield owned
    databases.drop(owned.url)


def kept_in(owned: Owned) -> list[int]:
    """The entries that keep a checkpoint."""
    each = (f"SELECT event_number FROM {table}" for table in CHECKPOINTS)  # noqa: S608
    return [number for (number,) in owned.rows(f"{' UNION '.join(each)} ORDER BY event_number")]


def one_kept_in(owned: Owned, table: str) -> int:
    """An entry that keeps a signed checkpoint in this table."""
    query = f"SELECT min(event_number) FROM {table} WHERE signature IS NOT NULL"  # noqa: S608
    return int(owned.value(query))


def place(report: Report) -> tuple[int | None, str | None]:
    assert report.fault is not None
    return report.fault.entry, report.fault.table


def test_the_report_says_which_signatures_were_checked_and_what_they_leave_open(owned: Owned) -> None:
    report = owned.verify()
    assert report.holds
    assert report.notes == ()
    first, second = public_text(FIRST), public_text(SECOND)
    covered = kept_in(owned)[-1] - 1
    assert report.signatures == (
        f"Entry {kept_in(owned)[0] + 1} takes up the key {first}, which signed it",
        f"Entry {kept_in(owned)[2] + 1} takes up the key {second}, which signed it, as did the key before it",
        "Checkpoints kept with the decisions on gains and on changes of loops, which are 8."
        f" Signed by the key {first}, verified: 2;"
        f" signed by the key {second}, verified: 3; without a signature: 1; none kept: 2",
        "No key was given: that the history's keys are the service's own was not checked",
        f"The last signed checkpoint covers entries 1 to {covered} of {report.entries}",
    )


def test_a_given_checkpoint_and_a_given_key_are_told(owned: Owned) -> None:
    store = Store(owned.url)
    with store.database.reading() as session:
        raw = writing.to_bytes(checkpoints.checkpoint(session, SECOND))
    store.database.close()
    report = verify(owned.url, checkpoint=Checkpoint.read(raw), held_key=public_text(FIRST))
    assert report.signatures[-3:] == (
        f"The signature of the checkpoint that was given holds, by the key {public_text(SECOND)}",
        f"The key that was given, {public_text(FIRST)}, is the history's; all later ones follow on it",
        f"The last signed checkpoint covers entries 1 to {report.entries} of {report.entries}",
    )


def test_a_given_checkpoint_without_a_signature_covers_nothing_by_one(owned: Owned) -> None:
    before = owned.verify().signatures
    *told, given, of_key, cover = owned.verify(owned.checkpoint()).signatures
    assert given == "The checkpoint that was given has no signature"
    assert (*told, of_key, cover) == before


def test_an_export_is_held_to_the_same(owned: Owned) -> None:
    store = Store(owned.url)
    with store.database.reading() as session:
        lines = [writing.to_bytes(entry) for entry in full_export.entries(session)]
    store.database.close()
    report = verify_export(lines)
    assert report.holds
    assert report.signatures == owned.verify().signatures


def test_every_kept_checkpoint_is_one_that_an_auditor_can_be_handed(owned: Owned) -> None:
    """Read out of the history's own text, years later, it is a file for the verification."""
    for number in kept_in(owned):
        raw = owned.value("SELECT canonical FROM history_events WHERE number = ?", number)
        document = json.loads(raw)["content"]["checkpoint"]
        assert verify(owned.url, checkpoint=Checkpoint.read(json.dumps(document).encode())).holds


OTHER: dict[str, object] = {
    "origin": "0" * 64,
    "size": 3,
    "digest": "0" * 64,
    "head": "0" * 64,
    "time": "2026-03-02T06:00:01Z",
    "public_key": public_text(STRANGE),
    "signature": base64.b64encode(bytes(64)).decode(),
    "decision_id": "0" * 32,
    "change_id": "0" * 32,
}

PARTS = [
    (table, name)
    for table, named_by in CHECKPOINTS.items()
    for name in OTHER
    if name not in CHECKPOINTS.values() or name == named_by
]


@pytest.mark.parametrize(("table", "name"), PARTS)
def test_a_part_that_was_changed_in_the_row_alone_is_named(owned: Owned, table: str, name: str) -> None:
    forged_at = one_kept_in(owned, table)
    change = f"UPDATE {table} SET {name} = ? WHERE event_number = ?"  # noqa: S608
    owned.execute((change, (OTHER[name], forged_at)))
    assert place(owned.verify()) == (forged_at, table)


@pytest.mark.parametrize(("table", "name"), PARTS)
def test_a_part_that_was_changed_is_named_though_every_later_digest_was_made_to_fit(
    owned: Owned, table: str, name: str
) -> None:
    forged_at = one_kept_in(owned, table)

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == forged_at:
            entry["rows"][table][0][name] = OTHER[name]

    rewrite_from(owned, forged_at, forge)
    owned.execute((f"UPDATE {table} SET {name} = ? WHERE event_number = ?", (OTHER[name], forged_at)))  # noqa: S608
    assert place(owned.verify()) == (forged_at, table)


def _last_years_reason(entry: dict[str, Any], _root: str, _origin: str) -> None:
    if entry["kind"] == "loop_registered":
        entry["content"]["remark"] = "forged"


def test_a_rewritten_history_does_not_fit_the_checkpoints_kept_in_it(owned: Owned) -> None:
    registered = owned.value("SELECT min(number) FROM history_events WHERE kind = 'loop_registered'")
    rewrite_from(owned, registered, _last_years_reason)
    assert place(owned.verify()) == (kept_in(owned)[0], "checkpoints")


Remake = Callable[[Row], None]


def _leave_the_signature(_row: Row) -> None:
    """The owner has none that would fit."""


def _sign_with_another_key(row: Row) -> None:
    signed = {name: value for name, value in row.items() if name not in (*CHECKPOINTS.values(), "signature")}
    signed["public_key"] = row["public_key"] = public_text(STRANGE)
    row["signature"] = base64.b64encode(STRANGE.sign(canonical_bytes(signed))).decode()


def _take_the_signature_off(row: Row) -> None:
    row["public_key"] = row["signature"] = None


def _rewrite(owned: Owned, remake: Remake) -> None:
    """Rewrite everything after the change of keys."""
    changed = owned.value("SELECT number FROM history_events WHERE kind = ?", signing_keys.CHANGED)

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == changed + 1:
            entry["content"]["remark"] = "forged"

    rewrite_with_checkpoints_from(owned, changed + 1, forge, remake)


@pytest.mark.parametrize("remake", [_leave_the_signature, _sign_with_another_key])
def test_nor_can_they_be_made_anew_without_the_key(owned: Owned, remake: Remake) -> None:
    _rewrite(owned, remake)
    report = owned.verify()
    assert place(report) == (kept_in(owned)[3], "checkpoints")
    assert report.signatures == ()
    assert report.fault is not None
    assert "key" in report.fault.what


def test_without_their_signatures_they_fit_and_the_report_says_what_is_covered(owned: Owned) -> None:
    """What the owner of a database can do: only a note, and a checkpoint held elsewhere, show it."""
    held = owned.checkpoint()
    before = owned.verify()
    _rewrite(owned, _take_the_signature_off)
    after = owned.verify()
    assert after.holds
    assert "; without a signature: 4;" in after.signatures[2]
    assert f"covers entries 1 to {kept_in(owned)[2] - 1} of" in after.signatures[-1]
    assert before.signatures != after.signatures
    assert after.notes[0].startswith("3 of the decisions made while the history had a key have no signed")
    assert not owned.verify(held).holds


def _a_word_of_the_confirmation(entry: dict[str, Any], _root: str, _origin: str) -> None:
    if entry["kind"] == "loop_change_confirmed":
        entry["content"]["decision"]["signed_by"]["full_name"] = "Somebody Else"


@pytest.mark.parametrize("remake", [_leave_the_signature, _sign_with_another_key])
def test_a_confirmation_that_was_altered_does_not_fit_its_own_checkpoint(
    owned: Owned, remake: Remake
) -> None:
    """Nobody needs to hold a later checkpoint, nor does another decision have to follow."""
    confirmed = owned.value("SELECT number FROM history_events WHERE kind = 'loop_change_confirmed'")
    rewrite_with_checkpoints_from(owned, confirmed, _a_word_of_the_confirmation, remake)
    assert place(owned.verify()) == (confirmed + 1, "change_checkpoints")


def test_a_confirmation_with_a_checkpoint_by_the_forgers_own_key_is_found(owned: Owned) -> None:
    """The owner of the database writes the whole confirmation, by the service's own code, without its key."""
    _with_store(owned, lambda store, loop: confirm(store, loop, None, revision=2))
    last = owned.verify().entries

    def claim_a_signature(entry: dict[str, Any], _root: str, _origin: str) -> None:
        entry["rows"]["change_checkpoints"][0]["signature"] = ""

    rewrite_with_checkpoints_from(owned, last, claim_a_signature, _sign_with_another_key)
    report = owned.verify()
    assert place(report) == (last, "change_checkpoints")
    assert report.fault is not None
    assert "another key than the history tells of" in report.fault.what


def test_a_confirmation_without_a_signed_checkpoint_is_told_and_is_no_fault(owned: Owned) -> None:
    """An older version of the service kept none, so that it cannot be a fault; nor is it passed over."""
    _with_store(owned, lambda store, loop: store.decide_change(store.propose(loop, revision=2)))
    report = owned.verify()
    assert report.holds
    assert report.notes[0].startswith("1 of the decisions made while the history had a key have no signed")
    covered = f"The last signed checkpoint covers entries 1 to {kept_in(owned)[-1] - 1} of {report.entries}"
    assert report.signatures[-1] == covered


def _with_store(owned: Owned, act: Callable[[Store, LoopView], object]) -> None:
    store = Store(owned.url)
    try:
        with store.database.reading() as session:
            loop = loops.find_by_tag(session, store.actor("reviewer"), "North", "FIC-101")
        act(store, loop)
    finally:
        store.database.close()


def test_with_a_key_that_nobody_took_up_the_report_says_that_there_is_none(
    databases: Databases,
) -> None:
    url = databases.new()
    migrating.migrate(url, now=START)
    assert verify(url).signatures == (
        "There is no decision, and so no checkpoint that was kept with one",
        "The history knows no key",
        "No signed checkpoint covers any entry",
    )
    databases.drop(url)


@pytest.mark.parametrize("forged", [7, [7], [{}], [{"decision_id": []}], None])
def test_what_is_no_row_is_a_fault_and_no_crash(owned: Owned, forged: object) -> None:
    number = kept_in(owned)[0]

    def forge(entry: dict[str, Any], _root: str, _origin: str) -> None:
        if entry["number"] == number:
            entry["rows"]["checkpoints"] = forged

    rewrite_from(owned, number, forge)
    assert place(owned.verify()) == (number, "checkpoints")
