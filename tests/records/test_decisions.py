"""Signing: who, with what, on exactly which content."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy.exc import IntegrityError

from service.documents.decisions import Deviation
from service.documents.loops import LoopRegistration
from service.records import accounts, decisions, loops, queries
from service.records.errors import (
    BasisChanged,
    FieldErrors,
    MissingDeviation,
    NotApprovable,
    NotFound,
    NotIndependent,
    SigningSuspended,
    StaleContent,
    TooManyAttempts,
    WrongPassword,
    WrongStep,
)
from service.records.roles import CONSOLE
from service.records.tables.submissions import Decision
from service.records.views import LoopView
from tests.records.store import Store, gains, password_of, registration

TIGHT = {"gain_margin_min": 6.0, "worst_case_max_sensitivity_max": 2.0}
"""Of the gains that the tests begin with (gain margin 5.24): the first is not met, the second not
assessed.
"""


def test_a_signature_keeps_name_time_meaning_reason_and_the_digest_it_is_on(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit()
    store.approve(submission)
    signed = store.read(submission).decisions[0].decision
    assert (signed.signed_by.full_name, signed.signed_at) == ("Reviewer", store.clock())
    assert (signed.content_digest, signed.reason) == (submission.content_digest, "reviewed")
    assert "approve" in signed.meaning


def test_a_later_change_of_name_does_not_reach_a_signature(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.approve(submission)
    with store.database.writing() as session:
        accounts.rename(session, CONSOLE, "reviewer", "Another Name", "married", store.clock())
    assert store.read(submission).decisions[0].decision.signed_by.full_name == "Reviewer"


def test_the_digest_is_the_sha256_of_the_kept_bytes(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    with store.database.reading() as session:
        kept = queries.content_bytes(session, store.actor("auditor"), submission.id)
    assert hashlib.sha256(kept).hexdigest() == submission.content_digest


def test_a_wrong_password_signs_nothing(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    before = store.counts()
    with pytest.raises(WrongPassword):
        store.approve(submission, password=password_of("second"))
    assert store.counts() == before


def test_a_refused_signing_leaves_its_trace_in_a_transaction_of_its_own(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    with pytest.raises(WrongPassword) as refused:
        store.approve(submission, password="something else entirely")
    with store.database.writing() as session:
        decisions.record_refused_signing(
            session, store.actor("reviewer"), submission.id, refused.value, store.clock()
        )
    assert store.events()[-1] == "signing_refused"
    assert store.read(submission).state == "awaiting_review"


def test_repeated_wrong_passwords_have_to_wait_and_the_right_one_with_them(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit()
    for _ in range(5):
        with pytest.raises(WrongPassword) as refused:
            store.approve(submission, password="something else entirely")
        with store.database.writing() as session:
            decisions.record_refused_signing(
                session, store.actor("reviewer"), submission.id, refused.value, store.clock()
            )
    with pytest.raises(TooManyAttempts) as waiting:
        store.approve(submission)
    store.clock.forward(seconds=waiting.value.retry_after_s)
    store.approve(submission)


def test_after_a_reset_a_person_signs_nothing_until_a_second_administrator_confirms(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit()
    new = "a new password of theirs"
    with store.database.writing() as session:
        accounts.reset_password(
            session, store.actor("administrator"), "reviewer", new, "forgotten", store.clock()
        )
    with pytest.raises(SigningSuspended):
        store.approve(submission, password=new)
    with store.database.writing() as session, pytest.raises(NotIndependent):
        accounts.confirm_reset(
            session, store.actor("administrator"), "reviewer", "known to me", store.clock()
        )
    with store.database.writing() as session:
        accounts.confirm_reset(session, store.actor("outsider"), "reviewer", "known to me", store.clock())
    store.approve(submission, password=new)


def test_another_digest_than_the_one_reviewed_is_refused(store: Store, loop: LoopView) -> None:
    with pytest.raises(StaleContent):
        store.approve(store.submit(), content_digest="0" * 64)


def test_two_approvals_by_two_people_where_the_loop_is_safety_related(store: Store) -> None:
    store.add_model(store.register(safety_related=True))
    submission = store.submit()
    store.approve(submission)
    assert store.read(submission).state == "awaiting_review"
    with pytest.raises(NotIndependent):
        store.approve(submission)
    store.approve(submission, "second")
    assert store.read(submission).state == "approved"


def test_a_rejection_ends_it_after_a_first_approval(store: Store) -> None:
    store.add_model(store.register(safety_related=True))
    submission = store.submit()
    store.approve(submission)
    store.decide(submission, "reject", "second")
    assert store.read(submission).state == "rejected"


def test_whoever_approved_first_is_not_offered_to_approve_again(store: Store) -> None:
    store.add_model(store.register(safety_related=True))
    submission = store.submit()
    store.approve(submission)
    assert "approve" not in store.read(submission, "reviewer").open_actions
    assert "approve" in store.read(submission, "second").open_actions


def test_each_criterion_not_met_or_not_assessed_asks_for_a_deviation_of_its_own(store: Store) -> None:
    store.add_model(store.register(criteria=TIGHT))
    submission = store.submit()
    assert submission.deviations_needed == ("gain_margin_min", "worst_case_max_sensitivity_max")
    one = (Deviation(criterion="gain_margin_min", reason="accepted"),)
    with pytest.raises(MissingDeviation) as refused:
        store.approve(submission, deviation=one)
    assert [problem.pointer for problem in refused.value.errors] == ["/deviation"]
    assert "worst_case_max_sensitivity_max" in refused.value.errors[0].detail
    store.approve(submission)


def test_a_deviation_from_what_is_met_is_refused(store: Store, loop: LoopView) -> None:
    idle = (Deviation(criterion="gain_margin_min", reason="to be sure"),)
    with pytest.raises(FieldErrors) as refused:
        store.approve(store.submit(), deviation=idle)
    assert refused.value.errors[0].pointer == "/deviation/0/criterion"


def test_a_setting_that_nobody_knows_asks_for_a_deviation(store: Store, loop: LoopView) -> None:
    submission = store.submit(controller=gains(measurement_filter_s="unknown"))
    assert len(submission.deviations_needed) == 1
    with pytest.raises(MissingDeviation):
        store.approve(submission, deviation=())


def test_without_criteria_of_its_own_a_loop_is_held_against_the_floors_of_the_service(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit(controller=gains(5.0))
    content = submission.content
    assert content.criteria_source == "service_floors"
    # a quarter of the plant's two seconds of dead time
    assert content.recomputations[0].criteria.delay_margin_s_min == 0.5
    assert "gain_margin_min" in submission.deviations_needed


# the plant e^(-2s)/(1+10s) under Kc·(1 + 1/(10·s)) is Kc·e^(-2s)/(10·s): its gain margin is 5·(π/2)/Kc
@pytest.mark.parametrize(
    ("proportional", "past"),
    [(5.5, ()), (5.9, ("Maximum sensitivity",)), (6.1, ("Gain margin", "Maximum sensitivity"))],
)
def test_past_the_hard_floors_no_deviation_suffices(
    store: Store, loop: LoopView, proportional: float, past: tuple[str, ...]
) -> None:
    submission = store.submit(controller=gains(proportional))
    assert submission.verdict == "stable"
    margin = next(c for c in submission.content.criteria if c.finding.criterion == "gain_margin_min")
    assert margin.finding.value == pytest.approx(7.853981633974483 / proportional, rel=1e-9)
    assert submission.deviations_needed
    assert len(submission.hindrances) == len(past)
    assert all(name in why for name, why in zip(past, submission.hindrances, strict=True))
    if past:
        with pytest.raises(NotApprovable, match="no deviation suffices"):
            store.approve(submission)
    else:
        store.approve(submission)


def test_an_unstable_loop_is_recorded_and_never_approved(store: Store, loop: LoopView) -> None:
    submission = store.submit(controller=gains(9.0))
    assert submission.verdict == "unstable"
    with pytest.raises(NotApprovable, match="unstable"):
        store.approve(submission)
    store.decide(submission, "reject")


def test_one_operating_point_that_is_not_stable_hinders_the_whole(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load", gain=8.0)
    submission = store.submit()
    assert [r.answer.verdict for r in submission.content.recomputations] == ["stable", "unstable"]
    assert submission.verdict == "unstable"
    with pytest.raises(NotApprovable, match="high load"):
        store.approve(submission)


def test_without_a_model_nothing_is_approved(store: Store) -> None:
    store.register()
    submission = store.submit()
    assert submission.verdict is None
    with pytest.raises(NotApprovable, match="no plant model"):
        store.approve(submission)


LIMITS = {"gain_margin_min": 1.5}


def _change(store: Store, loop: LoopView, changed: LoopRegistration) -> None:
    with store.database.writing() as session:
        loops.change(session, store.actor("submitter"), loop.id, changed, "why", 1, store.clock())


def _change_loop(store: Store, loop: LoopView) -> None:
    _change(store, loop, registration(description="other", criteria=LIMITS))


def _tighten_criteria(store: Store, loop: LoopView) -> None:
    _change(store, loop, registration(criteria=LIMITS | {"phase_margin_deg_min": 20.0}))


def _change_models(store: Store, loop: LoopView) -> None:
    store.add_model(loop, gain=1.1)


def _change_gains_in_force(store: Store, loop: LoopView) -> None:
    store.submit(kind="emergency", controller=gains(1.1))


@pytest.mark.parametrize(
    ("change", "named"),
    [
        (_change_loop, "the loop's own data"),
        (_tighten_criteria, "the criteria"),
        (_change_models, "the plant models"),
        (_change_gains_in_force, "the gains in force"),
    ],
)
def test_what_was_recomputed_on_another_basis_is_not_approved(
    store: Store, change: Callable[[Store, LoopView], None], named: str
) -> None:
    loop = store.register(criteria=LIMITS)
    store.add_model(loop)
    submission = store.submit()
    change(store, loop)
    assert store.read(submission).changed_basis == (named,)
    with pytest.raises(BasisChanged, match=named):
        store.approve(submission)
    store.decide(submission, "reject")


def test_an_emergency_change_is_approved_although_it_runs_itself(store: Store, loop: LoopView) -> None:
    submission = store.submit(kind="emergency")
    assert store.read(submission).changed_basis == ()
    store.approve(submission)
    assert store.read(submission).state == "in_force"


def test_an_emergency_change_whose_place_was_taken_is_still_reviewed(store: Store, loop: LoopView) -> None:
    submission = store.submit(kind="emergency")
    store.submit(kind="emergency", controller=gains(1.1))
    store.approve(submission)
    assert store.read(submission).state == "superseded"


def test_a_decision_is_final(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.decide(submission, "reject")
    with pytest.raises(WrongStep, match="rejected"):
        store.approve(submission, "second")


@pytest.mark.parametrize("decision", ["approve", "reject", "withdraw", "revoke"])
def test_outside_ones_areas_there_is_no_such_submission(store: Store, loop: LoopView, decision: str) -> None:
    with pytest.raises(NotFound):
        store.decide(store.submit(), decision, "outsider")


def test_the_database_itself_refuses_an_author_who_approves(store: Store, loop: LoopView) -> None:
    submission = store.submit("colleague")
    row: dict[str, Any] = {
        "id": "f" * 32,
        "event_number": 1,
        "submission_id": submission.id,
        "ordinal": 0,
        "decision": "approve",
        "decided_by": store.actor("colleague").account_id,
        "decided_at": store.clock() + timedelta(seconds=1),
        "submission_digest": submission.content_digest,
        "content": b"{}",
        "content_digest": "0" * 64,
    }
    with store.database.writing() as session:
        session.add(Decision(**row))
        with pytest.raises(IntegrityError, match="own submission"):
            session.flush()
        session.rollback()
