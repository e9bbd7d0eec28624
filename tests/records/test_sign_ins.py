"""Signing in tells nothing of who has an account; sessions end once and for all."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy import Engine, event

from service.records import accounts, history_queries, passwords, sign_ins
from service.records.errors import NotAuthenticated, TooManyAttempts
from service.records.history_queries import HistoryFilter
from service.records.roles import CONSOLE
from tests.records.store import CHEAP, HERE, Store, password_of


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


def test_a_closed_account_is_refused_like_a_wrong_password_and_its_attempt_is_told(store: Store) -> None:
    with store.database.writing() as session:
        accounts.close(session, CONSOLE, "second", "left", store.clock())
    with pytest.raises(NotAuthenticated, match="name or password is wrong"):
        sign_ins.sign_in(store.database, "second", password_of("second"), HERE)
    with store.database.reading() as session:
        (refused,) = history_queries.history(session, CONSOLE, HistoryFilter(kind="sign_in_refused")).items
    assert (refused.actor, refused.content) == ("nobody", {"account": "second"})


def test_a_name_that_nobody_has_is_not_written_down(store: Store) -> None:
    """It may be a password, typed into the wrong field."""
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(store.database, "my own password!", "my own password!", HERE)
    with store.database.reading() as session:
        (refused,) = history_queries.history(session, CONSOLE, HistoryFilter(kind="sign_in_refused")).items
    assert refused.content == {"account": None}
    assert b"my own" not in refused.canonical


def test_a_password_that_is_replaced_while_it_is_compared_signs_nobody_in(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    compare = passwords.verified

    def meanwhile(*compared: Any) -> bool:
        with store.database.writing() as session:
            accounts.reset_password(session, CONSOLE, "reviewer", "fifteen letters", "stolen", store.clock())
        return compare(*compared)

    monkeypatch.setattr(passwords, "verified", meanwhile)
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), HERE)
    assert store.counts()["sign_in_sessions"] == 0


def test_a_session_says_when_it_ends_and_when_its_use_is_noted_next(store: Store) -> None:
    began = store.clock()
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), HERE)
    assert (started.ends_at - began, started.actor.name) == (timedelta(hours=12), "reviewer")
    for passed_s, due in ((59, False), (1, True)):
        store.clock.forward(seconds=passed_s)
        with store.database.reading() as session:
            assert sign_ins.resume(session, started.secret, store.clock()).use_is_due is due
    with store.database.reading() as session:
        assert accounts.find(session, CONSOLE, "reviewer").last_used_at == began


def test_a_session_holds_to_the_last_moment_of_its_limits(store: Store) -> None:
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), HERE)
    store.clock.forward(minutes=30)
    with store.database.writing() as session:
        present = sign_ins.resume(session, started.secret, store.clock())
        # used to the end, so that the absolute limit alone is left
        sign_ins.note_use(session, present.id, started.ends_at)
        assert sign_ins.resume(session, started.secret, started.ends_at).id == present.id
        with pytest.raises(NotAuthenticated):
            sign_ins.resume(session, started.secret, started.ends_at + timedelta(seconds=1))


def test_a_session_that_nobody_uses_is_over_after_half_an_hour(store: Store) -> None:
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), HERE)
    store.clock.forward(minutes=30, seconds=1)
    with store.database.reading() as session, pytest.raises(NotAuthenticated, match="is over"):
        sign_ins.resume(session, started.secret, store.clock())


def test_a_password_longer_than_any_is_wrong(store: Store) -> None:
    """Four code points may compose to one character; more than four times as many make no password."""
    long = "x" * (4 * passwords.CHARACTERS_MAX + 1)
    with pytest.raises(NotAuthenticated):
        sign_ins.sign_in(store.database, "reviewer", long, HERE)
    # no such password can be set, so that a hash of it shows that its length alone refuses it
    assert not passwords.verified(CHEAP, CHEAP.hash(long), long)
    assert passwords.verified(CHEAP, CHEAP.hash(long[1:]), long[1:])


def test_no_password_is_right_where_there_is_no_account() -> None:
    for password in ("the password of no account", "anything else at all"):
        assert not passwords.verified(CHEAP, None, password)


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
        with pytest.raises(NotAuthenticated):
            sign_ins.resume(session, "made up", store.clock())
        sign_ins.note_use(session, "0" * 64, store.clock())
        sign_ins.sign_out(session, "0" * 64, store.clock())
    assert store.counts()["sign_in_sessions"] == 0


def test_a_session_goes_on_while_it_is_used_and_ends_when_it_is_not(store: Store) -> None:
    started = store.sign_in()
    for _ in range(3):
        store.clock.forward(minutes=20)
        with store.database.writing() as session:
            present = sign_ins.resume(session, started.secret, store.clock())
            sign_ins.note_use(session, present.id, store.clock())
    store.clock.now += sign_ins.IDLE_LIMIT + timedelta(seconds=1)
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_a_session_ends_after_its_absolute_limit_however_much_it_is_used(store: Store) -> None:
    started = store.sign_in()
    while store.clock() <= started.ends_at:
        with store.database.writing() as session:
            present = sign_ins.resume(session, started.secret, store.clock())
            sign_ins.note_use(session, present.id, store.clock())
        store.clock.forward(minutes=29)
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_after_signing_out_the_cookie_is_worth_nothing(store: Store) -> None:
    started = store.sign_in()
    with store.database.writing() as session:
        sign_ins.sign_out(session, sign_ins.resume(session, started.secret, store.clock()).id, store.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_each_session_has_secrets_of_its_own(store: Store) -> None:
    secrets = [store.sign_in().secret for _ in range(2)]
    with store.database.reading() as session:
        first, second = (sign_ins.resume(session, secret, store.clock()) for secret in secrets)
    assert first.id != second.id
    assert first.csrf_secret != second.csrf_secret
    assert len(first.csrf_secret) == 32


@pytest.mark.parametrize("name", ["reviewer", "no-such-name"])
def test_a_failed_sign_in_says_the_same_for_known_and_unknown_names_and_leaves_its_trace(
    store: Store, name: str
) -> None:
    with pytest.raises(NotAuthenticated, match="name or password is wrong"):
        store.sign_in(name, "something else entirely")
    assert store.events()[-1] == "sign_in_refused"


@pytest.mark.parametrize("name", ["reviewer", "no-such-name"])
def test_a_name_that_fails_too_often_has_to_wait_from_wherever_it_comes(store: Store, name: str) -> None:
    for _ in range(5):
        with pytest.raises(NotAuthenticated):
            store.sign_in(name, "something else entirely")
    with pytest.raises(TooManyAttempts):
        store.sign_in(name, password_of(name), source="192.0.2.2")


def test_each_further_failure_doubles_the_wait_up_to_a_limit(store: Store) -> None:
    waits = []
    for _ in range(14):
        try:
            store.sign_in("reviewer", "something else entirely")
        except TooManyAttempts as refused:
            waits.append(refused.retry_after_s)
            store.clock.forward(seconds=refused.retry_after_s)
            with pytest.raises(NotAuthenticated):
                store.sign_in("reviewer", "something else entirely")
        except NotAuthenticated:
            continue
    assert waits[:6] == [30, 60, 120, 240, 480, 900]
    assert set(waits[6:]) == {900}


def test_an_address_that_tries_many_names_has_to_wait(store: Store) -> None:
    for index in range(30):
        with pytest.raises(NotAuthenticated):
            store.sign_in(f"name-{index}", "something else entirely")
    with pytest.raises(TooManyAttempts):
        store.sign_in()
    assert store.sign_in(source="192.0.2.2").actor.name == "reviewer"


def test_a_success_forgets_the_failures_of_the_name(store: Store) -> None:
    for _ in range(2):
        for _ in range(4):
            with pytest.raises(NotAuthenticated):
                store.sign_in("reviewer", "something else entirely")
        store.sign_in()
