"""The first answer under a key is kept with its change, once, for whoever sent it."""

from __future__ import annotations

import pytest

from service.records import idempotency
from service.records.errors import IdempotencyKeyReused
from service.records.idempotency import KeptAnswer
from tests.records.store import Store

ANSWER = KeptAnswer(fingerprint="f" * 64, status=201, location="/v1/loops/1", etag=None, body=b'{"id":1}')


def test_an_answer_is_kept_for_one_account_under_one_key(store: Store) -> None:
    with store.database.writing() as session:
        idempotency.keep(session, store.actor("submitter"), "key", ANSWER, store.clock())
    with store.database.reading() as session:
        assert idempotency.find(session, store.actor("submitter"), "key") == ANSWER
        assert idempotency.find(session, store.actor("reviewer"), "key") is None


def test_an_answer_is_rolled_back_with_the_change_it_belongs_to(store: Store) -> None:
    with store.database.writing() as session:
        idempotency.keep(session, store.actor("submitter"), "key", ANSWER, store.clock())
        session.rollback()
    with store.database.reading() as session:
        assert idempotency.find(session, store.actor("submitter"), "key") is None


def test_a_key_is_used_once(store: Store) -> None:
    with store.database.writing() as session:
        idempotency.keep(session, store.actor("submitter"), "key", ANSWER, store.clock())
        with pytest.raises(IdempotencyKeyReused):
            idempotency.keep(session, store.actor("submitter"), "key", ANSWER, store.clock())
