"""Accounts: who may have one, what it is called and may do, and its password."""

from __future__ import annotations

from typing import Any

import pytest
from sqlalchemy import text
from sqlalchemy.exc import IntegrityError

from service.records import accounts, sign_ins, tokens
from service.records.accounts import NewAccount
from service.records.errors import (
    AlreadyExists,
    Conflict,
    FieldErrors,
    NotAllowed,
    NotAuthenticated,
    NotFound,
    WrongPassword,
)
from service.records.roles import CONSOLE
from tests.records.store import Store, password_of


def _new(**changes: Any) -> NewAccount:
    fields: dict[str, Any] = {
        "name": "newcomer",
        "full_name": "New Comer",
        "roles": ("submitter",),
        "password": "fifteen letters",
    }
    return NewAccount(**(fields | changes))


def _add(store: Store, **changes: Any) -> None:
    with store.database.writing() as session:
        accounts.add(session, CONSOLE, _new(**changes), store.clock())


@pytest.mark.parametrize(
    ("changes", "pointer"),
    [
        ({"password": "fourteen chars"}, "/new_password"),
        ({"password": "x" * 129}, "/new_password"),
        ({"name": "New Comer"}, "/name"),
        ({"name": "nеwcomer"}, "/name"),  # a Cyrillic letter
        ({"name": ""}, "/name"),
        ({"full_name": " "}, "/full_name"),
        ({"full_name": "a\u202eb"}, "/full_name"),
        ({"roles": ()}, "/roles"),
        ({"roles": ("owner",)}, "/roles"),
        ({"areas": ("",)}, "/areas/0"),
    ],
)
def test_an_account_that_cannot_be_is_refused_by_field(
    store: Store, changes: dict[str, Any], pointer: str
) -> None:
    with pytest.raises(FieldErrors) as refused:
        _add(store, **changes)
    assert [problem.pointer for problem in refused.value.errors] == [pointer]


@pytest.mark.parametrize("password", ["fifteen letters", "x" * 128, "a  b  c  d  e  é", "123456789012345"])
def test_passwords_of_15_to_128_characters_are_taken_without_other_rules(store: Store, password: str) -> None:
    _add(store, password=password)
    assert store.sign_in("newcomer", password).actor.name == "newcomer"


def test_an_accented_letter_typed_in_two_ways_is_one_letter(store: Store) -> None:
    _add(store, password="caf\u00e9 at the gates")
    assert store.sign_in("newcomer", "cafe\u0301 at the gates").actor.name == "newcomer"


@pytest.mark.parametrize("name", ["reviewer", "console"])
def test_a_name_is_given_once(store: Store, name: str) -> None:
    with pytest.raises(AlreadyExists):
        _add(store, name=name)


def test_the_name_of_a_closed_account_stays_taken_and_its_tokens_and_sessions_end(store: Store) -> None:
    started = store.sign_in()
    with store.database.writing() as session:
        _, token = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
        accounts.close(session, CONSOLE, "reviewer", "left", store.clock())
    with store.database.reading() as session:
        for call, secret in ((sign_ins.resume, started.secret), (tokens.authenticate, token)):
            with pytest.raises(NotAuthenticated):
                call(session, secret, store.clock())
    with pytest.raises(NotAuthenticated):
        store.sign_in()
    with pytest.raises(AlreadyExists):
        _add(store, name="reviewer")


@pytest.mark.parametrize(
    "statement",
    [
        "DELETE FROM accounts WHERE name = 'reviewer'",
        "UPDATE accounts SET name = 'somebody' WHERE name = 'reviewer'",
    ],
)
def test_the_database_itself_keeps_names(store: Store, statement: str) -> None:
    with store.database.writing() as session:
        with pytest.raises(IntegrityError):
            session.execute(text(statement))
        session.rollback()


@pytest.mark.parametrize("person", ["submitter", "reviewer", "auditor"])
def test_only_an_administrator_changes_accounts(store: Store, person: str) -> None:
    actor, now = store.actor(person), store.clock()
    with store.database.writing() as session:
        for change in (
            lambda: accounts.add(session, actor, _new(), now),
            lambda: accounts.change_access(session, actor, "reviewer", ("auditor",), (), "why", now),
            lambda: accounts.rename(session, actor, "reviewer", "X", "why", now),
            lambda: accounts.close(session, actor, "reviewer", "why", now),
            lambda: accounts.reset_password(session, actor, "reviewer", "fifteen letters", "why", now),
            lambda: accounts.confirm_reset(session, actor, "reviewer", "why", now),
            lambda: tokens.issue(session, actor, "reviewer", "tool", now),
        ):
            with pytest.raises(NotAllowed):
                change()


def test_a_role_taken_away_is_gone_at_the_next_request(store: Store) -> None:
    with store.database.writing() as session:
        accounts.change_access(
            session, CONSOLE, "reviewer", ("auditor",), ("Drying",), "moved", store.clock()
        )
    actor = store.actor("reviewer")
    assert (actor.roles, actor.areas) == (frozenset({"auditor"}), frozenset({"Drying"}))


def test_each_change_of_an_account_is_told_with_what_was_before_and_never_a_secret(store: Store) -> None:
    now = store.clock()
    with store.database.writing() as session:
        accounts.rename(session, CONSOLE, "reviewer", "Another", "married", now)
        accounts.change_access(session, CONSOLE, "reviewer", ("auditor",), (), "moved", now)
        tokens.issue(session, CONSOLE, "reviewer", "tool", now)
        accounts.close(session, CONSOLE, "reviewer", "left", now)
    assert store.events()[-4:] == [
        "account_renamed",
        "account_access_changed",
        "token_issued",
        "account_closed",
    ]


def test_ones_own_account_is_seen_and_others_by_administrators_and_auditors(store: Store) -> None:
    with store.database.reading() as session:
        assert accounts.find(session, store.actor("submitter"), "submitter").name == "submitter"
        assert accounts.find(session, store.actor("auditor"), "submitter").name == "submitter"
        with pytest.raises(NotFound):
            accounts.find(session, store.actor("submitter"), "reviewer")
        with pytest.raises(NotAllowed):
            accounts.accounts(session, store.actor("submitter"))


def test_accounts_are_listed_a_page_at_a_time(store: Store) -> None:
    seen: list[str] = []
    after: str | None = None
    with store.database.reading() as session:
        while True:
            page = accounts.accounts(session, store.actor("administrator"), after, 3)
            seen += [account.name for account in page.items]
            after = page.after
            if after is None:
                break
    assert seen == sorted(seen)
    assert len(seen) == len(set(seen)) == 7


def test_accounts_unused_for_90_days_are_listed(store: Store) -> None:
    store.clock.forward(days=60)
    store.sign_in("reviewer")
    _add(store)
    store.clock.forward(days=31)
    with store.database.reading() as session:
        found = accounts.unused(session, store.actor("auditor"), store.clock())
        with pytest.raises(NotAllowed):
            accounts.unused(session, store.actor("submitter"), store.clock())
    assert [account.name for account in found] == [
        "administrator",
        "auditor",
        "colleague",
        "outsider",
        "second",
        "submitter",
    ]


def test_ones_own_password_is_changed_with_the_old_one_and_all_sessions_end(store: Store) -> None:
    started, new = store.sign_in(), "another fifteen letters"
    with store.database.writing() as session:
        actor = store.actor("reviewer")
        with pytest.raises(WrongPassword):
            accounts.change_password(session, actor, "not the old one", new, store.clock())
        accounts.change_password(session, actor, password_of("reviewer"), new, store.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())
    assert store.sign_in("reviewer", new).actor.name == "reviewer"


def test_a_reset_without_a_second_administrator_has_nothing_to_confirm(store: Store) -> None:
    with store.database.writing() as session, pytest.raises(Conflict):
        accounts.confirm_reset(session, store.actor("administrator"), "reviewer", "why", store.clock())


def test_nobody_resets_their_own_password(store: Store) -> None:
    with store.database.writing() as session, pytest.raises(NotAllowed):
        accounts.reset_password(
            session,
            store.actor("administrator"),
            "administrator",
            "fifteen letters",
            "forgotten",
            store.clock(),
        )


def test_a_new_account_shows_its_password_to_nobody() -> None:
    assert "a horse of the battery" not in repr(_new(password="a horse of the battery"))
