"""Passwords that were reset: who sees that one awaits its confirmation, and for how long."""

from __future__ import annotations

import pytest

from service.records import accounts, resets
from service.records.errors import NotAllowed, NotFound
from service.records.resets import ResetView
from service.records.roles import CONSOLE, Actor
from tests.records.store import Store


def _reset(store: Store, name: str, reason: str = "forgotten", by: Actor | None = None) -> None:
    actor = by or store.actor("administrator")
    store.clock.forward(minutes=1)
    with store.database.writing() as session:
        accounts.reset_password(session, actor, name, "a password to be changed", reason, store.clock())


def _awaiting(store: Store, actor: Actor | None = None) -> tuple[ResetView, ...]:
    with store.database.reading() as session:
        return resets.awaiting(session, actor or store.actor("outsider"))


def _names(store: Store) -> list[str]:
    return [reset.account.name for reset in _awaiting(store)]


def test_before_any_reset_nothing_awaits_a_confirmation(store: Store) -> None:
    assert _awaiting(store) == ()


def test_a_reset_tells_whose_password_it_was_who_reset_it_why_and_when(store: Store) -> None:
    _reset(store, "reviewer", "forgotten in the holidays")
    (found,) = _awaiting(store)
    events = store.events()
    assert (found.account.name, found.reset_by, found.reason) == (
        "reviewer",
        "administrator",
        "forgotten in the holidays",
    )
    assert (found.entry.number, found.entry.time) == (len(events), store.clock())
    assert events[-1] == "password_reset"


def test_of_two_resets_of_one_account_the_later_one_is_told_and_the_latest_comes_first(store: Store) -> None:
    _reset(store, "reviewer", "first")
    _reset(store, "second")
    _reset(store, "reviewer", "once more")
    assert _names(store) == ["reviewer", "second"]
    assert _awaiting(store)[0].reason == "once more"


def test_what_was_confirmed_or_closed_awaits_nothing(store: Store) -> None:
    for name in ("reviewer", "second", "colleague"):
        _reset(store, name)
    with store.database.writing() as session:
        now = store.clock()
        accounts.confirm_reset(session, store.actor("outsider"), "second", "seen in person", now)
        accounts.close(session, CONSOLE, "colleague", "left", now)
    assert _names(store) == ["reviewer"]


def test_whoever_reset_it_the_account_itself_and_the_console_do_not_confirm_it(store: Store) -> None:
    _reset(store, "reviewer")
    _reset(store, "outsider", by=CONSOLE)
    administrator, outsider = store.actor("administrator"), store.actor("outsider")
    assert [each.may_confirm for each in _awaiting(store, administrator)] == [True, False]
    assert [each.may_confirm for each in _awaiting(store, outsider)] == [False, True]
    assert [each.may_confirm for each in _awaiting(store, CONSOLE)] == [False, False]
    assert [each.reset_by for each in _awaiting(store)] == ["console", "administrator"]


def test_one_is_found_by_the_name_of_its_account(store: Store) -> None:
    _reset(store, "second")
    _reset(store, "reviewer")
    with store.database.reading() as session:
        assert resets.find(session, store.actor("administrator"), "second").account.name == "second"
        with pytest.raises(NotFound, match="awaits a confirmation"):
            resets.find(session, store.actor("administrator"), "colleague")


@pytest.mark.parametrize("person", ["submitter", "reviewer", "auditor"])
def test_nobody_but_an_administrator_sees_them(store: Store, person: str) -> None:
    _reset(store, "second")
    with store.database.reading() as session:
        for name in ("second", "nobody"):
            with pytest.raises(NotAllowed):
                resets.find(session, store.actor(person), name)
        with pytest.raises(NotAllowed):
            resets.awaiting(session, store.actor(person))
