"""Signing in tells nothing of who has an account; sessions end once and for all."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import pytest
from sqlalchemy import Engine, event

from service.records import accounts, passwords, sign_ins
from service.records.errors import NotAuthenticated
from service.records.roles import CONSOLE
from tests.records.store import Store, password_of

HERE = "192.0.2.1"
"""An address that stands for none (RFC 5737)."""


@contextmanager
def _statements() -> Iterator[list[str]]:
    """Every SQL statement that is sent meanwhile."""
    sent: list[str] = []

    def note(_connection: Any, _cursor: Any, statement: str, *_more: Any) -> None:
        sent.append(statement)

    event.listen(Engine, "before_cursor_execute", note)
    yield sent
    event.remove(Engine, "before_cursor_execute", note)


def _refused(store: Store, name: str) -> list[str]:
    # from an address that nothing came from yet
    with _statements() as sent, pytest.raises(NotAuthenticated):
        sign_ins.sign_in(store.database, name, "not the password of anybody", f"address of {name}")
    return sent


def test_a_refusal_sends_the_same_statements_whether_there_is_such_an_account_or_not(store: Store) -> None:
    with store.database.writing() as session:
        accounts.close(session, CONSOLE, "second", "left", store.clock())
    known, unknown, closed = (_refused(store, name) for name in ("reviewer", "nobody-here", "second"))
    assert known == unknown == closed


def test_a_password_is_hashed_at_the_cost_that_the_standard_recommends() -> None:
    """RFC 9106, section 4, second recommended option: Argon2id, t = 3, p = 4, m = 2^16 KiB, a salt of 128
    bits, a tag of 256 bits (22 and 43 characters of base64).
    """
    kept = passwords.hashed(passwords.default_hasher(), "long enough for all")
    _, kind, version, cost, salt, tag = kept.split("$")
    assert (kind, version, cost) == ("argon2id", "v=19", "m=65536,t=3,p=4")
    assert (len(salt), len(tag)) == (22, 43)


def test_a_session_that_has_ended_is_neither_used_nor_ended_again(store: Store) -> None:
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), HERE)
    with store.database.writing() as session:
        present = sign_ins.resume(session, started.secret, store.clock())
        sign_ins.sign_out(session, present.id, store.clock())
        before = _row(session)
        later = store.clock.forward(minutes=1)
        sign_ins.note_use(session, present.id, later)
        sign_ins.sign_out(session, present.id, later)
        assert _row(session) == before


def _row(session: Any) -> Any:
    return session.connection().exec_driver_sql("SELECT * FROM sign_in_sessions").one()


def test_a_session_that_never_was_is_neither_used_nor_ended(store: Store) -> None:
    with store.database.writing() as session:
        sign_ins.note_use(session, "0" * 64, store.clock())
        sign_ins.sign_out(session, "0" * 64, store.clock())
    assert store.counts()["sign_in_sessions"] == 0
