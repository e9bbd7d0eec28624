"""What each change of an account takes, does and tells, to the last character and the last second."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from sqlalchemy.orm import Session

from service.records import accounts, sign_ins, throttles, tokens
from service.records.accounts import NewAccount
from service.records.errors import (
    Conflict,
    FieldErrors,
    NotAuthenticated,
    NotFound,
    NotIndependent,
    SigningSuspended,
    TooManyAttempts,
    WrongPassword,
)
from service.records.roles import CONSOLE, Actor
from tests.records.store import Store, password_of

NEW = "another fifteen letters"


def _write(store: Store, change: Callable[[Session], object]) -> None:
    with store.database.writing() as session:
        change(session)


def _add(store: Store, **changes: Any) -> accounts.AccountView:
    fields: dict[str, Any] = {
        "name": "newcomer",
        "full_name": "New Comer",
        "roles": ("submitter",),
        "password": "fifteen letters",
    }
    with store.database.writing() as session:
        return accounts.add(session, CONSOLE, NewAccount(**(fields | changes)), store.clock())


@pytest.mark.parametrize("name", ["a", "0", "a" * 40, "a.b-c_d", "7up"])
def test_a_name_of_plain_characters_is_taken(store: Store, name: str) -> None:
    assert _add(store, name=name).name == name


@pytest.mark.parametrize("name", ["a" * 41, ".a", "a.", "-a", "a_", "A", "a b", "a\n"])
def test_any_other_name_is_refused(store: Store, name: str) -> None:
    with pytest.raises(FieldErrors):
        _add(store, name=name)


@pytest.mark.parametrize("full_name", ["N", "x" * 100, "Zoë O’Neill-Ødegård"])
def test_a_full_name_has_1_to_100_visible_characters(store: Store, full_name: str) -> None:
    assert _add(store, full_name=full_name).full_name == full_name


@pytest.mark.parametrize("full_name", ["x" * 101, "a\tb", "a\u200bb", "a\ud800b", "a\ue000b", "a\u0378b"])
def test_a_longer_one_or_one_with_what_cannot_be_seen_is_refused(store: Store, full_name: str) -> None:
    with pytest.raises(FieldErrors) as refused:
        _add(store, full_name=full_name)
    assert [problem.pointer for problem in refused.value.errors] == ["/full_name"]


def test_everything_wrong_with_a_new_account_is_told_at_once(store: Store) -> None:
    with pytest.raises(FieldErrors) as refused:
        _add(store, name="", full_name="", roles=(), areas=("Drying", "x" * 201), password="x")
    pointers = [problem.pointer for problem in refused.value.errors]
    assert pointers == ["/name", "/full_name", "/roles", "/areas/1", "/new_password"]


def test_roles_and_areas_are_kept_once_and_in_order(store: Store) -> None:
    view = _add(store, roles=("submitter", "auditor", "submitter"), areas=("Washing", "Drying", "Washing"))
    assert (view.roles, view.areas) == (("auditor", "submitter"), ("Drying", "Washing"))
    assert (view.created_at, view.closed_at, view.last_used_at) == (store.clock(), None, None)
    assert store.last_entry() == (
        "account_added",
        "console",
        {
            "account": "newcomer",
            "full_name": "New Comer",
            "roles": ["auditor", "submitter"],
            "areas": ["Drying", "Washing"],
        },
    )


def test_other_roles_and_areas_are_told_beside_those_before(store: Store) -> None:
    with store.database.writing() as session:
        view = accounts.change_access(
            session, CONSOLE, "outsider", ("auditor",), ("Washing",), "moved", store.clock()
        )
    assert (view.name, view.roles, view.areas) == ("outsider", ("auditor",), ("Washing",))
    assert store.last_entry()[2] == {
        "account": "outsider",
        "reason": "moved",
        "before": {
            "roles": ["administrator", "auditor", "reviewer", "submitter"],
            "areas": ["Tank farm"],
        },
        "roles": ["auditor"],
        "areas": ["Washing"],
    }


def test_another_full_name_is_told_beside_the_one_before(store: Store) -> None:
    with store.database.writing() as session:
        view = accounts.rename(session, CONSOLE, "reviewer", "Rita Viewer", "married", store.clock())
    assert view.full_name == "Rita Viewer"
    told = {"account": "reviewer", "reason": "married", "before": "Reviewer", "full_name": "Rita Viewer"}
    assert store.last_entry() == ("account_renamed", "console", told)
    with store.database.writing() as session, pytest.raises(FieldErrors) as refused:
        accounts.rename(session, CONSOLE, "reviewer", "", "married", store.clock())
    assert [problem.pointer for problem in refused.value.errors] == ["/full_name"]


@pytest.mark.parametrize(
    ("reason", "taken"), [("r", True), ("r" * 1000, True), ("r" * 1001, False), (" ", False)]
)
def test_each_change_has_a_reason_of_1_to_1000_characters(store: Store, reason: str, taken: bool) -> None:
    changes: list[Callable[[Session], object]] = [
        lambda session: accounts.rename(session, CONSOLE, "reviewer", "X", reason, store.clock()),
        lambda session: accounts.close(session, CONSOLE, "second", reason, store.clock()),
        lambda session: accounts.reset_password(session, CONSOLE, "reviewer", NEW, reason, store.clock()),
    ]
    for change in changes:
        if taken:
            _write(store, change)
        else:
            with pytest.raises(FieldErrors) as refused:
                _write(store, change)
            assert [problem.pointer for problem in refused.value.errors] == ["/reason"]


def test_nobody_changes_an_account_that_is_not_there_or_is_closed(store: Store) -> None:
    with pytest.raises(NotFound):
        _write(store, lambda session: accounts.close(session, CONSOLE, "nobody", "x", store.clock()))
    _write(store, lambda session: accounts.close(session, CONSOLE, "second", "left", store.clock()))
    assert store.last_entry() == ("account_closed", "console", {"account": "second", "reason": "left"})
    with pytest.raises(Conflict):
        _write(store, lambda session: accounts.rename(session, CONSOLE, "second", "X", "x", store.clock()))


def test_closing_ends_what_is_still_open_of_that_account_and_nothing_of_others(store: Store) -> None:
    with store.database.writing() as session:
        first, _ = tokens.issue(session, CONSOLE, "reviewer", "first", store.clock())
        tokens.issue(session, CONSOLE, "reviewer", "second", store.clock())
        _, anothers = tokens.issue(session, CONSOLE, "submitter", "tool", store.clock())
        tokens.revoke(session, CONSOLE, first.id, "lost", store.clock())
    own_session = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), "here")
    with store.database.reading() as session:
        own = sign_ins.resume(session, own_session.secret, store.clock()).id
    others_session = sign_ins.sign_in(store.database, "second", password_of("second"), "here")
    revoked_at = store.clock()
    closed_at = store.clock.forward(minutes=5)
    with store.database.writing() as session:
        closed = accounts.close(session, CONSOLE, "reviewer", "left", closed_at)
    assert (closed.name, closed.closed_at) == ("reviewer", closed_at)
    with store.database.reading() as session:
        found = {token.note: token.revoked_at for token in tokens.tokens(session, CONSOLE, "reviewer")}
        assert found == {"first": revoked_at, "second": closed_at}
        assert tokens.authenticate(session, anothers, store.clock()).actor.name == "submitter"
        assert sign_ins.resume(session, others_session.secret, store.clock()).actor.name == "second"
        assert session.get_one(sign_ins.SignInSession, own).ended_at == closed_at
        assert accounts.find(session, CONSOLE, "reviewer") == closed


def test_a_closed_account_acts_no_more(store: Store) -> None:
    reviewer = store.actor("reviewer")
    _write(store, lambda session: accounts.close(session, CONSOLE, "reviewer", "left", store.clock()))
    with store.database.reading() as session:
        for account_id in (str(reviewer.account_id), "0" * 32):
            with pytest.raises(NotAuthenticated):
                accounts.actor_of(session, account_id)


def test_an_account_is_unused_when_more_than_90_days_have_passed_since_it_was_made_or_used(
    store: Store,
) -> None:
    def unused() -> list[str]:
        with store.database.reading() as session:
            return [account.name for account in accounts.unused(session, CONSOLE, store.clock())]

    _write(store, lambda session: accounts.close(session, CONSOLE, "second", "left", store.clock()))
    store.clock.forward(days=90)
    assert unused() == []
    store.clock.forward(seconds=1)
    assert "reviewer" in unused()
    assert "second" not in unused()


def test_the_last_page_of_accounts_says_that_it_is_the_last(store: Store) -> None:
    with store.database.reading() as session:
        with pytest.raises(NotFound):
            accounts.find(session, CONSOLE, "nobody")
        assert len(accounts.accounts(session, store.actor("auditor")).items) == 7
        whole = accounts.accounts(session, CONSOLE, None, 7)
        assert (len(whole.items), whole.after) == (7, None)
        part = accounts.accounts(session, CONSOLE, None, 6)
        assert (len(part.items), part.after) == (6, "second")


# --- passwords


def _change_password(store: Store, present: str, new: str = NEW, person: str = "reviewer") -> None:
    actor = store.actor(person)
    _write(store, lambda session: accounts.change_password(session, actor, present, new, store.clock()))


def test_a_changed_password_ends_ones_own_sessions_alone_and_is_told(store: Store) -> None:
    own, others = (
        sign_ins.sign_in(store.database, name, password_of(name), "h") for name in ("reviewer", "second")
    )
    _change_password(store, password_of("reviewer"))
    assert store.last_entry() == ("password_changed", "reviewer", {"account": "reviewer"})
    with store.database.reading() as session:
        with pytest.raises(NotAuthenticated):
            sign_ins.resume(session, own.secret, store.clock())
        assert sign_ins.resume(session, others.secret, store.clock()).actor.name == "second"


def test_a_session_that_had_ended_keeps_the_time_of_its_end(store: Store) -> None:
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), "here")
    with store.database.writing() as session:
        present = sign_ins.resume(session, started.secret, store.clock())
        sign_ins.sign_out(session, present.id, store.clock())
    ended_at = store.clock()
    store.clock.forward(minutes=5)
    _change_password(store, password_of("reviewer"))
    with store.database.reading() as session:
        row = session.get_one(sign_ins.SignInSession, present.id)
        assert row.ended_at == ended_at


def test_a_new_password_that_is_none_is_refused(store: Store) -> None:
    with pytest.raises(FieldErrors) as refused:
        _change_password(store, password_of("reviewer"), "too short")
    assert [problem.pointer for problem in refused.value.errors] == ["/new_password"]


def test_a_right_password_forgets_the_wrong_ones_before_it(store: Store) -> None:
    subject = throttles.of_account("reviewer")
    for _ in range(2):
        for _ in range(4):
            _write(store, lambda session: throttles.count(session, subject, store.clock()))
        _change_password(store, password_of("reviewer"), password_of("reviewer"))


def test_a_refused_change_is_told_and_only_a_wrong_password_is_counted(store: Store) -> None:
    actor = store.actor("reviewer")
    wrong, suspended = WrongPassword("the password is wrong"), SigningSuspended("it was reset")
    for refusal in [suspended] * 6 + [wrong] * 5:
        with store.database.reading() as session:
            accounts.check_password(session, actor, password_of("reviewer"), store.clock())
        _write(
            store,
            lambda session: accounts.record_refused_password(session, actor, refusal, store.clock()),  # noqa: B023
        )
        told = {"account": "reviewer", "reason": refusal.detail}
        assert store.last_entry() == ("password_change_refused", "reviewer", told)
    with store.database.reading() as session, pytest.raises(TooManyAttempts):
        accounts.check_password(session, actor, password_of("reviewer"), store.clock())


def test_a_command_on_the_server_signs_nothing(store: Store) -> None:
    with store.database.reading() as session, pytest.raises(WrongPassword, match="person's own account"):
        accounts.check_password(session, CONSOLE, "whatever it may be", store.clock())


def _reset(store: Store, by: Actor, name: str = "reviewer") -> None:
    _write(store, lambda session: accounts.reset_password(session, by, name, NEW, "forgotten", store.clock()))


def test_a_reset_ends_the_sessions_and_suspends_signing(store: Store) -> None:
    started = sign_ins.sign_in(store.database, "reviewer", password_of("reviewer"), "here")
    _reset(store, CONSOLE)
    assert store.last_entry() == ("password_reset", "console", {"account": "reviewer", "reason": "forgotten"})
    with store.database.reading() as session:
        with pytest.raises(NotAuthenticated):
            sign_ins.resume(session, started.secret, store.clock())
        with pytest.raises(SigningSuspended):
            accounts.check_password(session, store.actor("reviewer"), NEW, store.clock())
        assert accounts.find(session, CONSOLE, "reviewer").signing_suspended


@pytest.mark.parametrize(
    ("reset_by", "confirmed_by", "holds"),
    [
        ("console", "administrator", True),
        ("administrator", "outsider", True),
        ("administrator", "administrator", False),
        ("administrator", "console", False),
        ("console", "console", False),
    ],
)
def test_a_reset_is_confirmed_by_a_second_administrator_by_name(
    store: Store, reset_by: str, confirmed_by: str, holds: bool
) -> None:
    people = {name: store.actor(name) for name in ("administrator", "outsider")} | {"console": CONSOLE}
    _reset(store, people[reset_by])

    def confirm(session: Session) -> None:
        accounts.confirm_reset(session, people[confirmed_by], "reviewer", "seen in person", store.clock())

    if not holds:
        with pytest.raises(NotIndependent):
            _write(store, confirm)
        return
    _write(store, confirm)
    told = {"account": "reviewer", "reason": "seen in person"}
    assert store.last_entry() == ("password_reset_confirmed", confirmed_by, told)
    with store.database.reading() as session:
        accounts.check_password(session, store.actor("reviewer"), NEW, store.clock())


def test_nobody_confirms_the_reset_of_their_own_password(store: Store) -> None:
    _reset(store, CONSOLE, "administrator")
    own = store.actor("administrator")
    with pytest.raises(NotIndependent):
        _write(store, lambda s: accounts.confirm_reset(s, own, "administrator", "mine", store.clock()))
