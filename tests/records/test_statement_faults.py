"""Whichever statement fails, all of a change is kept or nothing."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from sqlalchemy import Engine, event
from sqlalchemy.exc import OperationalError
from sqlalchemy.orm import Session

from service.documents.changes import LoopChangeRequest
from service.records import accounts, changes, decisions, idempotency, kept_sheets, loops, submissions, tokens
from service.records.accounts import NewAccount
from service.records.errors import WrongPassword
from service.records.idempotency import KeptAnswer
from service.records.roles import CONSOLE
from service.verification.verifier import verify
from tests.records.store import WIDER, Store, gains, model_version, registration

Change = Callable[[Session], object]
MOST_STATEMENTS = 200


def _register(store: Store) -> Change:
    actor = store.actor("submitter")
    return lambda session: loops.register(session, actor, registration(tag="LIC-7"), store.clock())


def _change_loop(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    changed = registration(description="other")
    return lambda session: loops.change(session, actor, loop.id, changed, 1, store.clock())


def _propose(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    request = LoopChangeRequest(revision=1, reason="ranged anew", loop=registration(pv=WIDER))
    return lambda session: changes.propose(session, actor, loop.id, request, store.clock())


def _confirm(store: Store) -> Change:
    loop, actor = store.register(), store.actor("reviewer")
    store.add_model(loop)
    store.submit(kind="baseline", controller=gains(1.0))
    store.submit()
    change = store.propose(loop)
    prepared = store.prepare_decision(change)
    return lambda session: changes.decide(session, actor, change.id, prepared, store.clock())


def _add_model(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    return lambda session: loops.add_model(session, actor, loop.id, model_version(), store.clock())


def _submit(store: Store) -> Change:
    store.add_model(store.register())
    store.submit(kind="baseline", controller=gains(1.0))
    prepared, actor = store.prepare(kind="emergency"), store.actor("submitter")
    return lambda session: submissions.submit(session, actor, prepared, store.clock())


def _sign(store: Store) -> Callable[[], object]:
    store.add_model(store.register())
    submission = store.submit()
    return lambda: store.approve(submission)


def _install(store: Store) -> Callable[[], object]:
    store.add_model(store.register())
    store.submit(kind="baseline", controller=gains(1.0))
    submission = store.submit()
    store.approve(submission)
    return lambda: store.install(submission)


def _keep_sheet(store: Store) -> Change:
    store.add_model(store.register())
    signed, actor = store.approve(store.submit()), store.actor("reviewer")
    decision_id = signed.decision.decision_id
    return lambda session: kept_sheets.keep(session, actor, decision_id, b"%PDF", "1", store.clock())


def _leave_trace(store: Store) -> Change:
    store.add_model(store.register())
    submission, actor = store.submit(), store.actor("reviewer")
    refusal = WrongPassword("the password is wrong")
    return lambda session: decisions.record_refused_signing(
        session, actor, submission.id, refusal, store.clock()
    )


def _add_account(store: Store) -> Change:
    new = NewAccount(name="new", full_name="New", roles=("reviewer",), password="fifteen letters")
    return lambda session: accounts.add(session, CONSOLE, new, store.clock())


def _close_account(store: Store) -> Change:
    return lambda session: accounts.close(session, CONSOLE, "reviewer", "left", store.clock())


def _issue_token(store: Store) -> Change:
    return lambda session: tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())


def _with_key(store: Store) -> Change:
    actor = store.actor("submitter")
    answer = KeptAnswer(fingerprint="f" * 64, status=201, location=None, etag=None, body=b"{}")

    def change(session: Session) -> None:
        loops.register(session, actor, registration(tag="LIC-7"), store.clock())
        idempotency.keep(session, actor, "key", answer, store.clock())

    return change


class _Fault:
    """Lets so many statements of any engine through, and fails the next one as a full disk would."""

    def __init__(self, statements: int) -> None:
        self.left = statements
        self.struck = False

    def __call__(self, _connection: Any, _cursor: Any, statement: str, *_: Any) -> None:
        if self.left == 0:
            self.struck = True
            raise OperationalError(statement, None, Exception("database or disk is full"))
        self.left -= 1


@pytest.mark.parametrize(
    "use_case",
    [
        _register,
        _change_loop,
        _propose,
        _confirm,
        _add_model,
        _submit,
        _keep_sheet,
        _leave_trace,
        _add_account,
        _close_account,
        _issue_token,
        _with_key,
    ],
)
def test_a_change_whose_nth_statement_fails_leaves_nothing(
    store: Store, use_case: Callable[[Store], Change]
) -> None:
    change = use_case(store)

    def once() -> None:
        with store.database.writing() as session:
            change(session)

    _strike_everywhere(store, once)


@pytest.mark.parametrize("use_case", [_sign, _install])
def test_a_signature_or_an_installation_whose_nth_statement_fails_leaves_nothing(
    store: Store, use_case: Callable[[Store], Callable[[], object]]
) -> None:
    _strike_everywhere(store, use_case(store))


def _strike_everywhere(store: Store, once: Callable[[], object]) -> None:
    before, entries = store.counts(), len(store.events())
    for statements in range(MOST_STATEMENTS):
        fault = _Fault(statements)
        event.listen(Engine, "before_cursor_execute", fault)
        try:
            once()
        except OperationalError:
            assert fault.struck
        finally:
            event.remove(Engine, "before_cursor_execute", fault)
        if not fault.struck:
            assert statements > 3
            assert len(store.events()) == entries + 1
            break
        assert store.counts() == before, f"after a fault at statement {statements}"
    else:
        pytest.fail(f"more than {MOST_STATEMENTS} statements")
    assert verify(store.url).holds
