"""What follows from a confirmed change: what awaits review is recomputed, gains in force are marked."""

from __future__ import annotations

import hashlib

import pytest

from service.records import changes, queries
from service.records.errors import BasisChanged, Conflict, NotIndependent, StaleContent
from service.records.queries import SubmissionFilter
from service.records.views import LoopView
from tests.records.store import WIDER, Store, gains


def test_what_awaits_review_is_recomputed_and_has_to_be_read_again(store: Store, loop: LoopView) -> None:
    units = gains(4.0, gain_basis="engineering_units")
    submission = store.submit(controller=units)
    assert submission.verdict == "stable"
    store.clock.forward(hours=1)
    change = store.propose(loop, pv={"low": 0.0, "high": 400.0, "unit": "m3/h"})
    store.decide_change(change)
    again = store.read(submission)
    # ten times the range is ten times the gain in per cent, which this plant does not stand
    assert again.verdict == "unstable"
    assert again.content_digest != submission.content_digest
    assert again.content.loop_revision == 2
    assert again.content.recomputed_again is not None
    assert again.content.recomputed_again.change_id == change.id
    assert again.changed_basis == ()
    assert (again.content.reason, again.content.submitted_at) == (
        submission.content.reason,
        submission.content.submitted_at,
    )
    with pytest.raises(StaleContent):
        store.decide(submission, "reject")
    told = store.last_entry()[2]
    assert told["recomputed"] == [
        {"submission_id": submission.id, "content_digest": again.content_digest, "verdict": "unstable"}
    ]


def test_the_digest_is_that_of_the_bytes_that_are_given_out(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.decide_change(store.propose(loop))
    with store.database.reading() as session:
        kept = queries.content_bytes(session, store.actor("auditor"), submission.id)
        curves = queries.curves(session, store.actor("auditor"), submission.id)
    again = store.read(submission)
    assert hashlib.sha256(kept).hexdigest() == again.content_digest
    assert len(curves) == len(again.content.recomputations) == 1


def test_recomputed_gains_are_approved_on_their_new_content(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.decide_change(store.propose(loop))
    store.approve(store.read(submission))
    assert store.read(submission).state == "approved"
    store.install(submission)
    assert store.read(submission).state == "in_force"


def test_a_first_approval_does_not_count_for_what_was_recomputed_after_it(store: Store) -> None:
    loop = store.register(safety_related=True)
    store.add_model(loop)
    submission = store.submit()
    store.approve(submission)
    store.decide_change(store.propose(loop, safety_related=True, pv=WIDER), person="second")
    again = store.read(submission)
    assert (again.state, again.approvals_needed) == ("awaiting_review", 2)
    assert "approve" in again.open_actions
    # the first reviewer may approve the new content, once
    store.approve(again)
    assert store.read(submission).state == "awaiting_review"
    with pytest.raises(NotIndependent):
        store.approve(again)
    store.approve(again, "second")
    assert store.read(submission).state == "approved"


def test_taking_safety_related_off_approves_nothing_by_itself(store: Store) -> None:
    loop = store.register(safety_related=True)
    store.add_model(loop)
    submission = store.submit()
    store.approve(submission)
    store.decide_change(store.propose(loop, safety_related=False), person="second")
    again = store.read(submission)
    assert (again.state, again.approvals_needed) == ("awaiting_review", 1)


def test_gain_sets_whose_only_point_is_retired_cannot_be_approved(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load")
    sets = [
        {"condition": name, "operating_points": [name], "controller": gains()}
        for name in ("normal", "high load")
    ]
    submission = store.submit(controller=None, gain_sets=sets)
    assert submission.hindrances == ()
    store.decide_change(store.propose(loop, retire="high load"))
    again = store.read(submission)
    assert [r.operating_point for r in again.content.recomputations] == ["normal"]
    assert "high load" in again.hindrances[0]


def test_an_emergency_change_that_awaits_its_review_is_recomputed_and_not_marked(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit(kind="emergency")
    store.decide_change(store.propose(loop))
    again = store.read(submission)
    assert again.content.recomputed_again is not None
    assert again.recheck_due is None
    store.approve(again)
    assert store.read(submission).state == "in_force"


def test_gains_in_force_are_marked_as_due_for_a_recheck(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.approve(submission)
    store.install(submission)
    change = store.propose(loop)
    store.decide_change(change)
    marked = store.read(submission)
    assert marked.content_digest == submission.content_digest
    assert marked.recheck_due is not None
    assert marked.recheck_due.change_id == change.id
    assert "the range of the PV changes from 0 to 40 m3/h to 0 to 60 m3/h" in marked.recheck_due.sentences
    with store.database.reading() as session:
        running = queries.gains_in_force(session, store.actor("auditor"), loop.id, store.clock())
    assert running is not None
    assert running.recheck_due == marked.recheck_due
    assert store.last_entry()[2]["recheck_due"] == [submission.id]


def test_approved_gains_that_are_not_yet_installed_are_marked_too(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.approve(submission)
    store.decide_change(store.propose(loop))
    assert store.read(submission).recheck_due is not None


def due(store: Store, wanted: bool = True) -> list[str]:
    with store.database.reading() as session:
        found = queries.submissions(
            session, store.actor("auditor"), SubmissionFilter(recheck_due=wanted), store.clock()
        )
    assert all(item.recheck_due is wanted for item in found.items)
    return [item.id for item in found.items]


def test_a_mark_is_left_behind_when_other_gains_take_the_place(store: Store, loop: LoopView) -> None:
    first = store.submit(kind="baseline", controller=gains(1.0))
    store.decide_change(store.propose(loop))
    assert due(store) == [first.id]
    second = store.submit()
    store.approve(second)
    store.install(second)
    assert due(store) == []
    assert set(due(store, wanted=False)) == {first.id, second.id}
    assert store.read(first).recheck_due is None


def test_lists_show_what_is_signed_now(store: Store, loop: LoopView) -> None:
    submission = store.submit(controller=gains(4.0, gain_basis="engineering_units"))
    store.decide_change(store.propose(loop, pv={"low": 0.0, "high": 400.0, "unit": "m3/h"}))
    again = store.read(submission)
    with store.database.reading() as session:
        (line,) = queries.awaiting_review(session, store.actor("reviewer"), store.clock()).items
    assert (line.verdict, line.content_digest) == ("unstable", again.content_digest)


def test_what_cannot_be_recomputed_keeps_its_content_and_is_told(
    store: Store, loop: LoopView, monkeypatch: pytest.MonkeyPatch
) -> None:
    from service.analysis.errors import FieldError  # noqa: PLC0415  used by this test alone
    from service.records import recomputing  # noqa: PLC0415  the same

    submission = store.submit()
    change = store.propose(loop)

    def fail(*_arguments: object) -> None:
        raise FieldError(("controller",), "the loop cannot be formed")

    monkeypatch.setattr(recomputing, "everywhere", fail)
    store.decide_change(change)
    assert store.last_entry()[2]["not_recomputed"] == [
        {"submission_id": submission.id, "reason": "the loop cannot be formed"}
    ]
    with pytest.raises(BasisChanged):
        store.approve(submission)


def test_a_confirmation_whose_recomputations_are_overtaken_is_refused(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    prepared = store.prepare_decision(change)
    store.submit()
    with store.database.writing() as session, pytest.raises(Conflict, match="decide again"):
        changes.decide(session, store.actor("reviewer"), change.id, prepared, store.clock())
    assert store.decide_change(change).state == "confirmed"
