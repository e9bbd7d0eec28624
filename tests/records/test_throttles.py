"""Failures that make a name or an address wait, and those that do not."""

from __future__ import annotations

from datetime import timedelta

import pytest

from service.records import sign_ins, throttles
from service.records.errors import NotAuthenticated, TooManyAttempts
from tests.records.store import HERE, Store, password_of

ADDRESS, NAME = throttles.of_source(HERE), throttles.of_account("reviewer")
FREE_OF_ADDRESS, FREE_OF_NAME = 30, 5


def _sign_in(store: Store, password: str | None = None) -> None:
    sign_ins.sign_in(store.database, "reviewer", password or password_of("reviewer"), HERE)


def _fail(store: Store, subject: str, times: int = 1) -> None:
    with store.database.writing() as session:
        for _ in range(times):
            throttles.count(session, subject, store.clock())


def _wait_s(store: Store, subject: str) -> int | None:
    with store.database.reading() as session:
        try:
            throttles.check(session, subject, store.clock())
        except TooManyAttempts as refused:
            return refused.retry_after_s
    return None


def test_people_who_sign_in_rightly_never_make_their_address_wait(store: Store) -> None:
    for _ in range(FREE_OF_ADDRESS + 2):
        _sign_in(store)
    assert _wait_s(store, ADDRESS) is None
    assert store.counts()["throttles"] == 0


def test_a_right_sign_in_leaves_its_address_as_it_was(store: Store) -> None:
    _fail(store, ADDRESS, FREE_OF_ADDRESS)
    for minutes in (1, 90):  # before and after an hour in which one failure is forgotten
        store.clock.forward(minutes=minutes)
        _sign_in(store)
        assert _wait_s(store, ADDRESS) is None
    _fail(store, ADDRESS)
    assert _wait_s(store, ADDRESS) == 30, "of thirty failures one is forgotten and one is new"


def test_a_wrong_password_leaves_the_attempt_counted_for_name_and_address(store: Store) -> None:
    _fail(store, ADDRESS, FREE_OF_ADDRESS - 1)
    _fail(store, NAME, FREE_OF_NAME - 1)
    with pytest.raises(NotAuthenticated):
        _sign_in(store, "something else entirely")
    assert (_wait_s(store, ADDRESS), _wait_s(store, NAME)) == (30, 30)


@pytest.mark.parametrize("subject", [ADDRESS, NAME])
def test_one_failure_a_day_never_adds_up_to_a_wait(store: Store, subject: str) -> None:
    for _ in range(FREE_OF_ADDRESS + 2):
        _fail(store, subject)
        assert _wait_s(store, subject) is None
        store.clock.forward(hours=23)


@pytest.mark.parametrize(
    ("passed", "wait_s"),
    [
        (timedelta(hours=1) - timedelta(seconds=1), 60),
        (timedelta(hours=1), 30),
        (timedelta(hours=2), None),
        (-timedelta(hours=2), 60),  # a clock set back forgets nothing, and adds nothing
    ],
)
def test_one_failure_is_forgotten_for_each_hour_without_another(
    store: Store, passed: timedelta, wait_s: int | None
) -> None:
    _fail(store, NAME, FREE_OF_NAME)
    store.clock.now += passed
    _fail(store, NAME)
    assert _wait_s(store, NAME) == wait_s


def test_the_wait_is_told_in_whole_seconds_and_ends_when_it_says(store: Store) -> None:
    _fail(store, NAME, FREE_OF_NAME)
    store.clock.forward(seconds=29.6)
    assert _wait_s(store, NAME) == 1
    store.clock.forward(seconds=0.4)
    assert _wait_s(store, NAME) is None


def test_a_wait_is_never_longer_than_the_longest(store: Store) -> None:
    _fail(store, NAME, FREE_OF_NAME + 50)
    assert _wait_s(store, NAME) == 15 * 60


def test_a_wait_of_a_clock_that_ran_ahead_ends_when_the_clock_is_put_right(store: Store) -> None:
    _fail(store, NAME, FREE_OF_NAME)
    store.clock.forward(days=-400)
    assert _wait_s(store, NAME) is None


def test_a_right_attempt_does_not_end_the_wait_of_others_who_failed_meanwhile(store: Store) -> None:
    _fail(store, ADDRESS, FREE_OF_ADDRESS - 2)
    with store.database.writing() as session:
        right = throttles.count(session, ADDRESS, store.clock())
    store.clock.forward(seconds=1)
    _fail(store, ADDRESS)
    with store.database.writing() as session:
        throttles.take_back(session, right)
    assert _wait_s(store, ADDRESS) == 30
    _fail(store, ADDRESS)
    assert _wait_s(store, ADDRESS) == 30, "the right attempt counts no more"
