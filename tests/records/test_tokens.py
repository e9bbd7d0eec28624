"""What issuing, using and revoking a token takes, does and tells."""

from __future__ import annotations

from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy import text as sql

from service.records import accounts, tokens
from service.records.errors import Conflict, FieldErrors, NotAllowed, NotAuthenticated, NotFound
from service.records.roles import CONSOLE
from tests.records.store import Store


@pytest.mark.parametrize(
    ("note", "taken"), [("n", True), ("n" * 200, True), ("n" * 201, False), (" ", False)]
)
def test_a_token_has_a_note_of_1_to_200_characters(store: Store, note: str, taken: bool) -> None:
    with store.database.writing() as session:
        if taken:
            view, _ = tokens.issue(session, CONSOLE, "reviewer", note, store.clock())
            assert view.note == note
        else:
            with pytest.raises(FieldErrors) as refused:
                tokens.issue(session, CONSOLE, "reviewer", note, store.clock())
            assert [problem.pointer for problem in refused.value.errors] == ["/note"]


def test_a_token_is_issued_for_an_open_account(store: Store) -> None:
    with store.database.writing() as session:
        with pytest.raises(NotFound):
            tokens.issue(session, CONSOLE, "nobody", "tool", store.clock())
        accounts.close(session, CONSOLE, "second", "left", store.clock())
        with pytest.raises(Conflict):
            tokens.issue(session, CONSOLE, "second", "tool", store.clock())


def test_what_is_issued_and_revoked_is_told_and_listed(store: Store) -> None:
    issued_at = store.clock()
    with store.database.writing() as session:
        view, text = tokens.issue(session, CONSOLE, "reviewer", "tuning tool", issued_at)
    assert (view.account_name, view.issued_at, view.revoked_at, view.last_used_at) == (
        "reviewer",
        issued_at,
        None,
        None,
    )
    identifier, _, secret = text.partition(".")
    assert (identifier, len(bytes.fromhex(secret))) == (view.id, 32)
    told = {"account": "reviewer", "token": view.id, "note": "tuning tool"}
    assert store.last_entry() == ("token_issued", "console", told)
    used_at = store.clock.forward(minutes=1)
    with store.database.writing() as session:
        tokens.note_use(session, view.id, used_at)
    revoked_at = store.clock.forward(minutes=1)
    with store.database.writing() as session:
        revoked = tokens.revoke(session, store.actor("administrator"), view.id, "lost", revoked_at)
        with pytest.raises(Conflict):
            tokens.revoke(session, CONSOLE, view.id, "again", revoked_at)
    assert (revoked.last_used_at, revoked.revoked_at) == (used_at, revoked_at)
    assert store.last_entry() == ("token_revoked", "administrator", told | {"reason": "lost"})
    with store.database.reading() as session:
        assert tokens.tokens(session, CONSOLE, "reviewer") == (revoked,)
        assert tokens.tokens(session, store.actor("reviewer"), "reviewer") == (revoked,)
        assert accounts.find(session, CONSOLE, "reviewer").last_used_at == used_at


def test_tokens_of_all_are_listed_for_those_who_look_after_them(store: Store) -> None:
    with store.database.reading() as session:
        for person in ("auditor", "administrator"):
            assert tokens.tokens(session, store.actor(person)) == ()
        for name in (None, "auditor"):
            with pytest.raises(NotAllowed):
                tokens.tokens(session, store.actor("reviewer"), name)


def test_tokens_come_by_account_and_time_of_issue(store: Store) -> None:
    for name, note in (("submitter", "c"), ("reviewer", "b"), ("reviewer", "a")):
        with store.database.writing() as session:
            tokens.issue(session, CONSOLE, name, note, store.clock.forward(minutes=1))
    with store.database.reading() as session:
        found = [(token.account_name, token.note) for token in tokens.tokens(session, CONSOLE)]
    assert found == [("reviewer", "b"), ("reviewer", "a"), ("submitter", "c")]


@pytest.mark.parametrize(("reason", "taken"), [("r" * 1000, True), ("r" * 1001, False), (" ", False)])
def test_a_token_is_revoked_with_a_reason(store: Store, reason: str, taken: bool) -> None:
    with store.database.writing() as session:
        view, _ = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
        if taken:
            assert tokens.revoke(session, CONSOLE, view.id, reason, store.clock()).revoked_at
        else:
            with pytest.raises(FieldErrors) as refused:
                tokens.revoke(session, CONSOLE, view.id, reason, store.clock())
            assert [problem.pointer for problem in refused.value.errors] == ["/reason"]


def test_whether_a_token_may_be_revoked_is_told_beforehand(store: Store) -> None:
    with store.database.writing() as session:
        view, _ = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
        for person in ("reviewer", "administrator"):
            tokens.check_may_revoke(session, store.actor(person), view.id)
        for person, identifier in (("auditor", view.id), ("administrator", "0" * 32)):
            with pytest.raises(NotFound):
                tokens.check_may_revoke(session, store.actor(person), identifier)


def test_the_use_of_an_account_is_noted_with_that_of_its_token_after_an_hour(store: Store) -> None:
    with store.database.writing() as session:
        view, text = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
        tokens.note_use(session, view.id, store.clock())
    for passed, due in ((timedelta(minutes=59), False), (timedelta(minutes=1), True)):
        store.clock.now += passed
        with store.database.reading() as session:
            assert tokens.authenticate(session, text, store.clock()).use_is_due is due


def _token(store: Store) -> str:
    with store.database.writing() as session:
        return tokens.issue(session, CONSOLE, "submitter", "tuning tool", store.clock())[1]


def test_a_token_is_its_accounts_and_only_its_digest_is_kept(store: Store) -> None:
    token = _token(store)
    with store.database.reading() as session:
        assert tokens.authenticate(session, token, store.clock()).actor.name == "submitter"
        kept = session.execute(sql("SELECT secret_sha256 FROM tokens")).scalar_one()
    assert bytes.fromhex(token.partition(".")[2]) != kept


@pytest.mark.parametrize(
    "spoil",
    [
        lambda token: "",
        lambda token: token.partition(".")[0],
        lambda token: token[:-1] + ("0" if token[-1] != "0" else "1"),
        lambda token: token + "00",
        lambda token: "0" * 32 + token[32:],
        lambda token: token[:33] + "not hexadecimal",
    ],
)
def test_anything_but_the_token_is_not_the_token(store: Store, spoil: Any) -> None:
    token = _token(store)
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        tokens.authenticate(session, spoil(token), store.clock())


def test_a_revoked_token_is_none(store: Store) -> None:
    token = _token(store)
    with store.database.writing() as session:
        tokens.revoke(session, store.actor("submitter"), token.partition(".")[0], "lost", store.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        tokens.authenticate(session, token, store.clock())


def test_anothers_token_is_not_there_to_be_revoked(store: Store) -> None:
    token_id = _token(store).partition(".")[0]
    with store.database.writing() as session, pytest.raises(NotFound):
        tokens.revoke(session, store.actor("reviewer"), token_id, "spite", store.clock())


def test_the_use_of_a_token_is_noted_at_most_once_an_hour(store: Store) -> None:
    token = _token(store)

    def is_due() -> bool:
        with store.database.reading() as session:
            return tokens.authenticate(session, token, store.clock()).use_is_due

    assert is_due()
    before = store.counts()
    with store.database.writing() as session:
        tokens.note_use(session, token.partition(".")[0], store.clock())
    assert store.counts() == before
    assert not is_due()
    store.clock.forward(hours=1)
    assert is_due()
