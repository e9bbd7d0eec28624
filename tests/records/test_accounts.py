"""Accounts, passwords, tokens, sign-ins and the throttle."""

from __future__ import annotations

from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy import text
from sqlalchemy.exc import IntegrityError

from service.records import accounts, idempotency, sign_ins, tokens
from service.records.accounts import NewAccount
from service.records.errors import (
    AlreadyExists,
    Conflict,
    FieldErrors,
    IdempotencyKeyReused,
    NotAllowed,
    NotAuthenticated,
    NotFound,
    TooManyAttempts,
    WrongPassword,
)
from service.records.idempotency import KeptAnswer
from service.records.roles import CONSOLE
from service.records.sign_ins import StartedSession
from tests.records.store import Store, password_of

HERE = "192.0.2.1"
"""An address that stands for none (RFC 5737)."""


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


def _sign_in(
    store: Store, name: str = "reviewer", password: str | None = None, source: str = HERE
) -> StartedSession:
    return sign_ins.sign_in(store.database, name, password or password_of(name), source)


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
    assert _sign_in(store, "newcomer", password).actor.name == "newcomer"


def test_an_accented_letter_typed_in_two_ways_is_one_letter(store: Store) -> None:
    _add(store, password="caf\u00e9 at the gates")
    assert _sign_in(store, "newcomer", "cafe\u0301 at the gates").actor.name == "newcomer"


@pytest.mark.parametrize("name", ["reviewer", "console"])
def test_a_name_is_given_once(store: Store, name: str) -> None:
    with pytest.raises(AlreadyExists):
        _add(store, name=name)


def test_the_name_of_a_closed_account_stays_taken_and_its_tokens_and_sessions_end(store: Store) -> None:
    started = _sign_in(store)
    with store.database.writing() as session:
        _, token = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
        accounts.close(session, CONSOLE, "reviewer", "left", store.clock())
    with store.database.reading() as session:
        for call, secret in ((sign_ins.resume, started.secret), (tokens.authenticate, token)):
            with pytest.raises(NotAuthenticated):
                call(session, secret, store.clock())
    with pytest.raises(NotAuthenticated):
        _sign_in(store)
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
    _sign_in(store, "reviewer")
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
    started, new = _sign_in(store), "another fifteen letters"
    with store.database.writing() as session:
        actor = store.actor("reviewer")
        with pytest.raises(WrongPassword):
            accounts.change_password(session, actor, "not the old one", new, store.clock())
        accounts.change_password(session, actor, password_of("reviewer"), new, store.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())
    assert _sign_in(store, "reviewer", new).actor.name == "reviewer"


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


# --- tokens


def _token(store: Store) -> str:
    with store.database.writing() as session:
        return tokens.issue(session, CONSOLE, "submitter", "tuning tool", store.clock())[1]


def test_a_token_is_its_accounts_and_only_its_digest_is_kept(store: Store) -> None:
    token = _token(store)
    with store.database.reading() as session:
        assert tokens.authenticate(session, token, store.clock()).actor.name == "submitter"
        kept = session.execute(text("SELECT secret_sha256 FROM tokens")).scalar_one()
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


# --- sign-ins


def test_a_session_goes_on_while_it_is_used_and_ends_when_it_is_not(store: Store) -> None:
    started = _sign_in(store)
    for _ in range(3):
        store.clock.forward(minutes=20)
        with store.database.writing() as session:
            present = sign_ins.resume(session, started.secret, store.clock())
            sign_ins.note_use(session, present.id, store.clock())
    store.clock.now += sign_ins.IDLE_LIMIT + timedelta(seconds=1)
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_a_session_ends_after_its_absolute_limit_however_much_it_is_used(store: Store) -> None:
    started = _sign_in(store)
    while store.clock() <= started.ends_at:
        with store.database.writing() as session:
            present = sign_ins.resume(session, started.secret, store.clock())
            sign_ins.note_use(session, present.id, store.clock())
        store.clock.forward(minutes=29)
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_after_signing_out_the_cookie_is_worth_nothing(store: Store) -> None:
    started = _sign_in(store)
    with store.database.writing() as session:
        sign_ins.sign_out(session, sign_ins.resume(session, started.secret, store.clock()).id, store.clock())
    with store.database.reading() as session, pytest.raises(NotAuthenticated):
        sign_ins.resume(session, started.secret, store.clock())


def test_each_session_has_secrets_of_its_own(store: Store) -> None:
    secrets = [_sign_in(store).secret for _ in range(2)]
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
        _sign_in(store, name, "something else entirely")
    assert store.events()[-1] == "sign_in_refused"


@pytest.mark.parametrize("name", ["reviewer", "no-such-name"])
def test_a_name_that_fails_too_often_has_to_wait_from_wherever_it_comes(store: Store, name: str) -> None:
    for _ in range(5):
        with pytest.raises(NotAuthenticated):
            _sign_in(store, name, "something else entirely")
    with pytest.raises(TooManyAttempts):
        _sign_in(store, name, password_of(name), source="192.0.2.2")


def test_each_further_failure_doubles_the_wait_up_to_a_limit(store: Store) -> None:
    waits = []
    for _ in range(14):
        try:
            _sign_in(store, "reviewer", "something else entirely")
        except TooManyAttempts as refused:
            waits.append(refused.retry_after_s)
            store.clock.forward(seconds=refused.retry_after_s)
            with pytest.raises(NotAuthenticated):
                _sign_in(store, "reviewer", "something else entirely")
        except NotAuthenticated:
            continue
    assert waits[:6] == [30, 60, 120, 240, 480, 900]
    assert set(waits[6:]) == {900}


def test_an_address_that_tries_many_names_has_to_wait(store: Store) -> None:
    for index in range(30):
        with pytest.raises(NotAuthenticated):
            _sign_in(store, f"name-{index}", "something else entirely")
    with pytest.raises(TooManyAttempts):
        _sign_in(store)
    assert _sign_in(store, source="192.0.2.2").actor.name == "reviewer"


def test_a_success_forgets_the_failures_of_the_name(store: Store) -> None:
    for _ in range(2):
        for _ in range(4):
            with pytest.raises(NotAuthenticated):
                _sign_in(store, "reviewer", "something else entirely")
        _sign_in(store)


# --- idempotency keys

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


def test_a_new_account_shows_its_password_to_nobody() -> None:
    assert "a horse of the battery" not in repr(_new(password="a horse of the battery"))
