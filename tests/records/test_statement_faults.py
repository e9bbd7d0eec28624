"""Whichever statement fails, the commit included, all of a change is kept or nothing."""

from __future__ import annotations

import ast
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from functools import partial
from pathlib import Path
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from sqlalchemy import Connection, Engine, event, inspect
from sqlalchemy.exc import OperationalError
from sqlalchemy.orm import Session

from service.documents.changes import LoopChangeRequest
from service.documents.decisions import DecisionRequest
from service.issuing import changes as issued_changes
from service.issuing import checkpoints, sheets, signing_keys
from service.records import (
    accounts,
    changes,
    decisions,
    history,
    idempotency,
    kept_checkpoints,
    kept_sheets,
    loops,
    migrating,
    sign_ins,
    submissions,
    throttles,
    tokens,
)
from service.records.accounts import NewAccount
from service.records.errors import NotAuthenticated, WrongPassword
from service.records.idempotency import KeptAnswer
from service.records.roles import CONSOLE
from service.records.views import LoopView, SubmissionView
from service.verification.verifier import verify
from tests.databases import Databases, opened, run
from tests.records.store import START, WIDER, Store, gains, model_version, password_of, registration

Change = Callable[[Session], object]
Step = Callable[[], object]
UseCase = Callable[[Store], Step]
MOST_STEPS = 200


def _register(store: Store) -> Change:
    actor = store.actor("submitter")
    return lambda session: loops.register(session, actor, registration(tag="LIC-7"), store.clock())


def _change_loop(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    changed = registration(description="other")
    return lambda session: loops.change(session, actor, loop.id, changed, "renamed", 1, store.clock())


def _propose(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    request = LoopChangeRequest(revision=1, reason="ranged anew", loop=registration(pv=WIDER))
    return lambda session: changes.propose(session, actor, loop.id, request, store.clock())


def _relied_on(store: Store) -> LoopView:
    """A loop of which gains are in force and others await review."""
    loop = store.register()
    store.add_model(loop)
    store.submit(kind="baseline", controller=gains(1.0))
    store.submit()
    return loop


def _confirm(store: Store) -> Change:
    change, actor = store.propose(_relied_on(store)), store.actor("reviewer")
    prepared = store.prepare_decision(change)
    return lambda session: changes.decide(session, actor, change.id, prepared, store.clock())


def _sign_change(store: Store, decision: str) -> Change:
    change, actor = store.propose(_relied_on(store)), store.actor("reviewer")
    prepared = store.prepare_decision(change, decision)
    key = Ed25519PrivateKey.generate()
    signing_keys.take_up(store.database, key)
    return lambda session: issued_changes.sign(session, actor, change.id, prepared, store.clock(), key)


def _keep_checkpoint(store: Store) -> Change:
    change, actor = store.propose(store.register()), store.actor("reviewer")
    store.decide_change(change)
    return lambda session: kept_checkpoints.keep_with_change(
        session, actor, change.id, checkpoints.checkpoint(session, None), store.clock()
    )


def _add_model(store: Store) -> Change:
    loop, actor = store.register(), store.actor("submitter")
    return lambda session: loops.add_model(session, actor, loop.id, model_version(), store.clock())


def _submit(store: Store) -> Change:
    store.add_model(store.register())
    store.submit(kind="baseline", controller=gains(1.0))
    prepared, actor = store.prepare(kind="emergency"), store.actor("submitter")
    return lambda session: submissions.submit(session, actor, prepared, store.clock())


def _sign(store: Store) -> Step:
    store.add_model(store.register())
    submission = store.submit()
    return lambda: store.approve(submission)


def _install(store: Store) -> Step:
    store.add_model(store.register())
    store.submit(kind="baseline", controller=gains(1.0))
    submission = store.submit()
    store.approve(submission)
    return lambda: store.install(submission)


def _keep_sheet(store: Store) -> Change:
    store.add_model(store.register())
    signed, actor = store.approve(store.submit()), store.actor("reviewer")
    decision_id = signed.decision.decision_id
    return lambda session: kept_sheets.keep(
        session, actor, decision_id, b"%PDF", "1", checkpoints.checkpoint(session, None), store.clock()
    )


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


def _made(store: Store) -> SubmissionView:
    store.add_model(store.register())
    return store.submit()


def _reject(store: Store) -> Step:
    submission = _made(store)
    return lambda: store.decide(submission, "reject")


def _withdraw(store: Store) -> Step:
    submission = _made(store)
    return lambda: store.decide(submission, "withdraw", "submitter")


def _revoke(store: Store) -> Step:
    submission = _made(store)
    store.approve(submission)
    return lambda: store.decide(store.read(submission), "revoke")


def _install_otherwise(store: Store) -> Step:
    submission = _made(store)
    store.approve(submission)
    return lambda: store.install(submission, as_left=gains(1.3))


def _sign_with_its_sheet(store: Store) -> Step:
    submission, actor = _made(store), store.actor("reviewer")
    request = DecisionRequest(
        decision="reject",
        reason="reviewed",
        content_digest=submission.content_digest,
        password=password_of("reviewer"),
    )
    key = Ed25519PrivateKey.generate()
    signing_keys.take_up(store.database, key)
    return _written(
        store, lambda session: sheets.sign(session, actor, submission.id, request, store.clock(), key)
    )


def _reject_change(store: Store) -> Step:
    change = store.propose(store.register())
    return lambda: store.decide_change(change, "reject")


def _withdraw_change(store: Store) -> Step:
    change = store.propose(store.register())
    return lambda: store.decide_change(change, "withdraw", "submitter")


def _change_access(store: Store) -> Change:
    return lambda session: accounts.change_access(
        session, CONSOLE, "reviewer", ("auditor", "submitter"), ("Drying",), "moved", store.clock()
    )


def _rename(store: Store) -> Change:
    return lambda session: accounts.rename(session, CONSOLE, "reviewer", "Other", "married", store.clock())


def _change_password(store: Store) -> Change:
    actor, old = store.actor("reviewer"), password_of("reviewer")
    return lambda session: accounts.change_password(
        session, actor, old, "another long password", store.clock()
    )


def _refuse_password(store: Store) -> Change:
    actor, refusal = store.actor("reviewer"), WrongPassword("the password is wrong")
    return lambda session: accounts.record_refused_password(session, actor, refusal, store.clock())


def _reset(store: Store) -> Change:
    actor = store.actor("administrator")
    return lambda session: accounts.reset_password(
        session, actor, "reviewer", "another long password", "forgotten", store.clock()
    )


def _confirm_reset(store: Store) -> Change:
    with store.database.writing() as session:
        _reset(store)(session)
    with store.database.writing() as session:
        new = NewAccount(
            name="second.administrator", full_name="B", roles=("administrator",), password="fifteen letters"
        )
        accounts.add(session, CONSOLE, new, store.clock())
    actor = store.actor("second.administrator")
    return lambda session: accounts.confirm_reset(session, actor, "reviewer", "known to me", store.clock())


def _revoke_token(store: Store) -> Change:
    with store.database.writing() as session:
        view, _ = tokens.issue(session, CONSOLE, "reviewer", "tool", store.clock())
    return lambda session: tokens.revoke(session, CONSOLE, view.id, "lost", store.clock())


def _take_up_key(store: Store) -> Step:
    key = Ed25519PrivateKey.generate()
    return lambda: signing_keys.take_up(store.database, key)


def _change_key(store: Store) -> Change:
    old, new = Ed25519PrivateKey.generate(), Ed25519PrivateKey.generate()
    signing_keys.take_up(store.database, old)
    return lambda session: signing_keys.change(
        session, CONSOLE, previous=old, new=new, reason="yearly", now=store.clock()
    )


def _written(store: Store, change: Change) -> Step:
    """The change in a transaction of its own."""

    def step() -> None:
        with store.database.writing() as session:
            change(session)

    return step


def _in_a_transaction(use_case: Callable[[Store], Change]) -> UseCase:
    return lambda store: _written(store, use_case(store))


USE_CASES: dict[str, UseCase] = {
    "loop_registered": _in_a_transaction(_register),
    "loop_registered under a key": _in_a_transaction(_with_key),
    "loop_changed": _in_a_transaction(_change_loop),
    "loop_change_proposed": _in_a_transaction(_propose),
    "loop_change_confirmed": _in_a_transaction(_confirm),
    "loop_change_rejected": _reject_change,
    "loop_change_withdrawn": _withdraw_change,
    "loop_change_confirmed and checkpoint_kept": _in_a_transaction(partial(_sign_change, decision="confirm")),
    "loop_change_rejected and checkpoint_kept": _in_a_transaction(partial(_sign_change, decision="reject")),
    "checkpoint_kept": _in_a_transaction(_keep_checkpoint),
    "model_added": _in_a_transaction(_add_model),
    "gains_submitted": _in_a_transaction(_submit),
    "gains_approved": _sign,
    "gains_rejected": _reject,
    "gains_withdrawn": _withdraw,
    "approval_revoked": _revoke,
    "gains_installed": _install,
    "gains_installed_otherwise": _install_otherwise,
    "sheet_kept": _in_a_transaction(_keep_sheet),
    "gains_rejected and sheet_kept": _sign_with_its_sheet,
    "signing_refused": _in_a_transaction(_leave_trace),
    "account_added": _in_a_transaction(_add_account),
    "account_access_changed": _in_a_transaction(_change_access),
    "account_renamed": _in_a_transaction(_rename),
    "account_closed": _in_a_transaction(_close_account),
    "password_changed": _in_a_transaction(_change_password),
    "password_change_refused": _in_a_transaction(_refuse_password),
    "password_reset": _in_a_transaction(_reset),
    "password_reset_confirmed": _in_a_transaction(_confirm_reset),
    "token_issued": _in_a_transaction(_issue_token),
    "token_revoked": _in_a_transaction(_revoke_token),
    "signing_key_taken_up": _take_up_key,
    "signing_key_changed": _in_a_transaction(_change_key),
}
"""What can happen, by the kinds of entry that it leaves."""

ELSEWHERE = {"store_made", "sign_in_refused"}
"""Below: they begin a store, and own several transactions."""


class _Fault:
    """Lets so many statements and commits of any engine through, and fails the next as a full disk would."""

    def __init__(self, steps: int) -> None:
        self.left = steps
        self.struck = False

    def before_statement(self, _connection: Any, _cursor: Any, statement: str, *_: Any) -> None:
        self._strike(statement)

    def before_commit(self, _connection: Any) -> None:
        self._strike("COMMIT")

    def _strike(self, statement: str) -> None:
        if self.left == 0:
            self.struck = True
            raise OperationalError(statement, None, Exception("database or disk is full"))
        self.left -= 1


@contextmanager
def _struck(steps: int) -> Iterator[_Fault]:
    fault = _Fault(steps)
    event.listen(Engine, "before_cursor_execute", fault.before_statement)
    event.listen(Engine, "commit", fault.before_commit)
    try:
        yield fault
    except OperationalError:
        assert fault.struck
    finally:
        event.remove(Engine, "before_cursor_execute", fault.before_statement)
        event.remove(Engine, "commit", fault.before_commit)


def _contents(connection: Connection) -> dict[str, str]:
    """A digest of every row of every table."""
    names = sorted(inspect(connection).get_table_names())
    if connection.dialect.name == "sqlite":
        return {name: repr(sorted(run(connection, f'SELECT * FROM "{name}"'))) for name in names}  # noqa: S608
    digest = "md5(coalesce(string_agg(t::text, '' ORDER BY t::text), ''))"
    each = [f"SELECT '{name}', {digest} FROM \"{name}\" AS t" for name in names]  # noqa: S608
    return dict(run(connection, " UNION ALL ".join(each))) if each else {}


def _strike_everywhere(url: str, once: Step) -> None:
    """Let each step fail in turn until all of it comes through."""
    with opened(url) as beside:
        before = _contents(beside)
        for steps in range(MOST_STEPS):
            with _struck(steps) as fault:
                once()
            if not fault.struck:
                assert steps > 3
                return
            assert _contents(beside) == before, f"after a fault at step {steps}"
    pytest.fail(f"more than {MOST_STEPS} steps")


@pytest.mark.parametrize("use_case", USE_CASES)
def test_whichever_statement_fails_all_is_kept_or_nothing(store: Store, use_case: str) -> None:
    once = USE_CASES[use_case](store)
    entries = store.events()
    _strike_everywhere(store.url, once)
    left = [kind for kind in use_case.split() if "_" in kind]
    assert store.events() == entries + left
    assert verify(store.url).holds


@pytest.mark.parametrize("password", ["wrong " * 4, password_of("reviewer")])
def test_whichever_statement_of_a_sign_in_fails_no_session_is_half_begun(store: Store, password: str) -> None:
    with opened(store.url) as beside:
        before = _contents(beside)
        for steps in range(MOST_STEPS):
            with suppress(NotAuthenticated), _struck(steps) as fault:
                sign_ins.sign_in(store.database, "reviewer", password, "127.0.0.1")
            if not fault.struck:
                break
            # the attempt itself may have been counted: it was made
            assert _contents(beside) | {"throttles": ""} == before | {"throttles": ""}
            _forget_attempts(store)
    was_right = password == password_of("reviewer")
    assert store.counts()["sign_in_sessions"] == int(was_right)
    assert (store.events()[-1] == "sign_in_refused") is not was_right
    assert verify(store.url).holds


def _forget_attempts(store: Store) -> None:
    with store.database.writing() as session:
        for subject in (throttles.of_account("reviewer"), throttles.of_source("127.0.0.1")):
            throttles.forget(session, subject)


def test_whichever_statement_of_a_migration_fails_the_database_stays_empty(databases: Databases) -> None:
    url = databases.new()
    for steps in range(0, 10 * MOST_STEPS, 17):
        with _struck(steps) as fault:
            migrating.migrate(url, now=START)
        if not fault.struck:
            break
        with opened(url) as beside:
            assert _contents(beside) == {}, f"after a fault at step {steps}"
    assert verify(url).holds
    databases.drop(url)


def test_every_kind_of_entry_has_its_use_case() -> None:
    wanted = {kind for use_case in USE_CASES for kind in use_case.split() if "_" in kind}
    assert wanted | ELSEWHERE == _kinds_in_the_code()


def _kinds_in_the_code() -> set[str]:
    """What `history.append` is given as kind, anywhere: texts beside `kind`, and tables of kinds."""
    folder = Path(history.__file__).parents[1]
    found = set(decisions.KINDS.values()) | set(changes.KINDS.values())
    found |= {history.STORE_MADE, signing_keys.TAKEN_UP, signing_keys.CHANGED}
    for file in (*folder.glob("records/*.py"), *folder.glob("issuing/*.py")):
        for node in ast.walk(ast.parse(file.read_text("utf-8"))):
            if isinstance(node, ast.Call) and ast.unparse(node.func) in ("history.append", "append", "_tell"):
                given = [each.value for each in node.keywords if each.arg == "kind"] or node.args[2:3]
                found |= {
                    part.value
                    for kind in given
                    for part in ast.walk(kind)
                    if isinstance(part, ast.Constant) and isinstance(part.value, str)
                }
    return found
