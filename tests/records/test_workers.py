"""What several processes of the service, and one started anew, know of each other's sign-ins: everything."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from contextlib import suppress

import pytest

from service.records import accounts, passwords, sign_ins
from service.records.errors import NotAuthenticated, TooManyAttempts
from service.records.roles import CONSOLE
from service.records.throttles import FREE_FAILURES
from tests.records.store import Store, password_of

WRONG = "something else entirely"


@pytest.fixture
def other(store: Store) -> Iterator[Store]:
    """The same store, opened by another worker with the same clock."""
    other = Store(store.url, clock=store.clock)
    yield other
    other.database.close()


def _sign_in(store: Store, password: str) -> sign_ins.StartedSession:
    return sign_ins.sign_in(store.database, "reviewer", password, "192.0.2.1")


def test_failures_are_counted_for_all_workers_together(store: Store, other: Store) -> None:
    for worker in (store, other, store, other, store):
        with pytest.raises(NotAuthenticated):
            _sign_in(worker, WRONG)
    for worker in (store, other):
        with pytest.raises(TooManyAttempts):
            _sign_in(worker, password_of("reviewer"))


def test_attempts_sent_at_once_are_no_more_than_attempts_sent_in_turn(store: Store, other: Store) -> None:
    outcomes: list[str] = []

    def attempt(worker: Store) -> None:
        try:
            _sign_in(worker, WRONG)
        except (NotAuthenticated, TooManyAttempts) as refusal:
            outcomes.append(type(refusal).__name__)

    threads = [threading.Thread(target=attempt, args=(worker,)) for worker in (store, other) * 6]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert outcomes.count("NotAuthenticated") == FREE_FAILURES["account"]
    assert outcomes.count("TooManyAttempts") == 12 - FREE_FAILURES["account"]


def test_a_service_started_anew_remembers_who_has_to_wait(store: Store) -> None:
    for _ in range(FREE_FAILURES["account"]):
        with suppress(NotAuthenticated):
            _sign_in(store, WRONG)
    store.database.close()
    again = Store(store.url, clock=store.clock)
    with pytest.raises(TooManyAttempts):
        _sign_in(again, password_of("reviewer"))
    again.database.close()


def test_a_session_that_one_worker_ended_is_over_for_the_other(store: Store, other: Store) -> None:
    started = _sign_in(store, password_of("reviewer"))
    with other.database.writing() as session:
        present = sign_ins.resume(session, started.secret, other.clock())
        sign_ins.sign_out(session, present.id, other.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_a_password_that_is_changed_while_the_old_one_is_compared_lets_nobody_in(
    store: Store, other: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    verified = passwords.verified

    def verified_while_another_changes_it(*arguments: object) -> bool:
        was_right = verified(*arguments)  # type: ignore[arg-type]
        monkeypatch.setattr(passwords, "verified", verified)
        with other.database.writing() as session:
            new, now = "another long password", other.clock()
            accounts.reset_password(session, CONSOLE, "reviewer", new, "known to others", now)
        return was_right

    monkeypatch.setattr(passwords, "verified", verified_while_another_changes_it)
    with pytest.raises(NotAuthenticated):
        _sign_in(store, password_of("reviewer"))
    assert store.counts()["sign_in_sessions"] == 0
    assert store.events()[-2:] == ["password_reset", "sign_in_refused"]
