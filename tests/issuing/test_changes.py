"""The checkpoint that is made at a decision on a change of a loop and kept with it."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

from service.issuing import changes, signing_keys
from service.issuing.base64_text import public_text
from service.records import change_queries, kept_checkpoints, migrating
from service.records.change_queries import ChangeFilter
from service.records.errors import NotFound, WrongPassword
from service.records.views import ChangeView, Checkpoint
from service.verification.verifier import verify
from tests.databases import Databases
from tests.records.store import START, Store

KEY = Ed25519PrivateKey.generate()

BY = {"confirm": "reviewer", "reject": "reviewer", "withdraw": "submitter"}


@pytest.fixture
def store(databases: Databases) -> Iterator[Store]:
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    store.add_people()
    yield store
    store.database.close()
    databases.drop(url)


def sign(store: Store, change: ChangeView, decision: str = "confirm", **changed: str) -> ChangeView:
    person = BY[decision]
    prepared = store.prepare_decision(change, decision, person, **changed)
    with store.database.writing() as session:
        return changes.sign(session, store.actor(person), change.id, prepared, store.clock(), KEY)


@pytest.mark.parametrize("decision", BY)
def test_the_checkpoint_covers_the_decision_and_is_signed(store: Store, decision: str) -> None:
    signing_keys.take_up(store.database, KEY)
    made = sign(store, store.propose(store.register()), decision).decision
    assert made is not None
    kept = made.checkpoint
    assert kept is not None
    assert (kept.size, kept.head) == (made.entry.number, made.entry.digest)
    assert kept.public_key == public_text(KEY)
    report = verify(store.url, held_key=public_text(KEY))
    assert (report.holds, report.notes) == (True, ())
    assert f"Signed by the key {public_text(KEY)}, verified: 1" in " ".join(report.signatures)


def test_it_is_read_again_with_the_change_alone_or_in_a_list(store: Store) -> None:
    change = store.propose(store.register())
    made = sign(store, change)
    assert store.read_change(change) == made
    with store.database.reading() as session:
        (listed,) = change_queries.changes(session, store.actor("auditor"), ChangeFilter()).items
    assert listed.decision == made.decision
    assert store.events()[-2:] == ["loop_change_confirmed", "checkpoint_kept"]


def test_a_decision_that_is_refused_keeps_none(store: Store) -> None:
    change = store.propose(store.register())
    with pytest.raises(WrongPassword):
        sign(store, change, password="wrong battery of somebody")
    assert store.counts()["change_checkpoints"] == 0


def _checkpoint() -> Checkpoint:
    return Checkpoint(
        origin="0" * 64,
        size=1,
        digest="0" * 64,
        head="0" * 64,
        time=None,
        public_key=None,
        signature=None,
    )


def test_there_is_none_before_a_decision(store: Store) -> None:
    change, reviewer = store.propose(store.register()), store.actor("reviewer")
    assert change.decision is None
    with store.database.writing() as session, pytest.raises(NotFound, match="no such decision"):
        kept_checkpoints.keep_with_change(session, reviewer, change.id, _checkpoint(), store.clock())
