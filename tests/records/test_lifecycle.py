"""The table of the life cycle, row by row, through the records themselves."""

from __future__ import annotations

from collections.abc import Callable
from datetime import timedelta
from pathlib import Path

import pytest

from service.records import lifecycle
from service.records.errors import NotAllowed, NotIndependent, WrongStep
from service.records.lifecycle import Action, State
from service.records.views import LoopView, SubmissionView
from tests.records.store import Store, gains

Walk = Callable[[Store], SubmissionView]


def _awaiting_review(store: Store) -> SubmissionView:
    return store.submit()


def _approved(store: Store) -> SubmissionView:
    submission = store.submit()
    store.approve(submission)
    return submission


def _in_force(store: Store) -> SubmissionView:
    submission = _approved(store)
    store.install(submission)
    return submission


def _emergency(store: Store) -> SubmissionView:
    return store.submit(kind="emergency")


def _superseded_emergency(store: Store) -> SubmissionView:
    first = store.submit(kind="emergency")
    store.submit(kind="emergency", controller=gains(1.2))
    return first


def _baseline(store: Store) -> SubmissionView:
    return store.submit(kind="baseline")


def _lapsed(store: Store) -> SubmissionView:
    until = (store.clock() + timedelta(hours=8)).isoformat()
    submission = store.submit(temporary_until=until)
    store.approve(submission)
    store.install(submission)
    store.clock.forward(hours=9)
    return submission


def _decided(decision: str, person: str) -> Callable[[Store, Walk], SubmissionView]:
    def walk(store: Store, start: Walk) -> SubmissionView:
        submission = start(store)
        store.decide(submission, decision, person)
        return submission

    return walk


WALKS: dict[State, Walk] = {
    "awaiting_review": _awaiting_review,
    "approved": _approved,
    "in_force": _in_force,
    "installed_awaiting_review": _emergency,
    "superseded_awaiting_review": _superseded_emergency,
    "recorded": _baseline,
    "lapsed": _lapsed,
    "rejected": lambda store: _decided("reject", "reviewer")(store, _awaiting_review),
    "withdrawn": lambda store: _decided("withdraw", "submitter")(store, _awaiting_review),
    "revoked": lambda store: _decided("revoke", "reviewer")(store, _approved),
}
"""A way into each state that is stored, and into the one that the clock makes and that has ways out."""

ASKED_FOR: tuple[Action, ...] = ("approve", "reject", "withdraw", "revoke", "install", "install_otherwise")


def _take(store: Store, submission: SubmissionView, action: Action) -> None:
    match action:
        case "install":
            store.install(submission)
        case "install_otherwise":
            store.install(submission, as_left=gains(1.6))
        case "approve":
            store.approve(submission)
        case _:
            store.decide(submission, action, "submitter" if action == "withdraw" else "reviewer")


@pytest.mark.parametrize("state", WALKS)
def test_each_state_is_reached_as_the_table_says(store: Store, loop: LoopView, state: State) -> None:
    assert store.read(WALKS[state](store)).state == state


@pytest.mark.parametrize("action", ASKED_FOR)
@pytest.mark.parametrize("state", WALKS)
def test_an_action_leads_where_the_table_says_and_nowhere_else(
    store: Store, loop: LoopView, state: State, action: Action
) -> None:
    submission = WALKS[state](store)
    before = store.counts()
    target = next((row.target for row in lifecycle.TABLE if (row.state, row.action) == (state, action)), None)
    if target is None:
        with pytest.raises(WrongStep):
            _take(store, submission, action)
        assert store.counts() == before
    else:
        _take(store, submission, action)
        assert store.read(submission).state == target
        assert store.counts()["history_events"] == before["history_events"] + 1


@pytest.mark.parametrize(
    ("earlier", "reads"),
    [
        (_in_force, "superseded"),
        (_baseline, "superseded"),
        (_lapsed, "superseded"),
        (_emergency, "superseded_awaiting_review"),
    ],
)
def test_gains_that_come_into_force_supersede_those_before(
    store: Store, loop: LoopView, earlier: Walk, reads: State
) -> None:
    before = earlier(store)
    store.submit(kind="emergency", controller=gains(1.1))
    assert store.read(before).state == reads


def test_gains_that_were_revoked_while_they_ran_stay_revoked_when_others_take_their_place(
    store: Store, loop: LoopView
) -> None:
    before = _in_force(store)
    store.decide(before, "revoke")
    store.submit(kind="emergency", controller=gains(1.1))
    assert store.read(before).state == "revoked"


def test_a_planned_change_supersedes_what_was_in_force_when_it_is_installed(
    store: Store, loop: LoopView
) -> None:
    first = _in_force(store)
    second = store.submit(controller=gains(1.2))
    store.approve(second)
    assert store.read(first).state == "in_force"
    store.install(second, as_left=gains(1.2))
    assert (store.read(first).state, store.read(second).state) == ("superseded", "in_force")


def test_an_approval_expires_by_the_clock_and_nothing_is_written(store: Store, loop: LoopView) -> None:
    until = store.clock() + timedelta(days=7)
    submission = store.submit(install_by=until.isoformat())
    store.approve(submission)
    before = store.counts()
    store.clock.now = until
    assert store.read(submission).state == "approved"
    store.clock.forward(seconds=1)
    assert store.read(submission).state == "expired"
    assert store.counts() == before
    with pytest.raises(WrongStep, match="expired"):
        store.install(submission)


def test_a_temporary_change_past_its_time_is_overdue_and_never_current(store: Store, loop: LoopView) -> None:
    view = store.read(_lapsed(store))
    assert (view.state, view.overdue) == ("lapsed", True)


def test_a_temporary_change_that_was_never_installed_lapses_without_being_overdue(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit(temporary_until=(store.clock() + timedelta(hours=1)).isoformat())
    store.approve(submission)
    store.clock.forward(hours=2)
    view = store.read(submission)
    assert (view.state, view.overdue) == ("lapsed", False)


def test_an_emergency_change_is_overdue_when_its_review_is_late(store: Store, loop: LoopView) -> None:
    submission = _emergency(store)
    assert store.read(submission).review_due_at == submission.content.submitted_at + timedelta(hours=72)
    assert not store.read(submission).overdue
    store.clock.forward(hours=73)
    assert store.read(submission).overdue
    store.approve(submission)
    assert not store.read(submission).overdue


@pytest.mark.parametrize("decision", ["approve", "reject"])
def test_whoever_submitted_neither_approves_nor_rejects(store: Store, loop: LoopView, decision: str) -> None:
    submission = store.submit("colleague")
    with pytest.raises(NotIndependent):
        store.decide(submission, decision, "colleague")


@pytest.mark.parametrize("decision", ["approve", "reject"])
def test_whoever_prepared_neither_approves_nor_rejects(store: Store, loop: LoopView, decision: str) -> None:
    submission = store.submit(prepared_by=["colleague"])
    with pytest.raises(NotIndependent):
        store.decide(submission, decision, "colleague")


@pytest.mark.parametrize("person", ["submitter", "auditor", "administrator"])
@pytest.mark.parametrize("decision", ["approve", "reject", "revoke"])
def test_only_a_reviewer_decides(store: Store, loop: LoopView, decision: str, person: str) -> None:
    submission = store.submit()
    with pytest.raises(NotAllowed):
        store.decide(submission, decision, person)


@pytest.mark.parametrize("person", ["reviewer", "administrator", "colleague"])
def test_only_an_author_withdraws(store: Store, loop: LoopView, person: str) -> None:
    submission = store.submit()
    with pytest.raises(NotAllowed):
        store.decide(submission, "withdraw", person)


def test_whoever_prepared_withdraws_too(store: Store, loop: LoopView) -> None:
    submission = store.submit(prepared_by=["colleague"])
    store.decide(submission, "withdraw", "colleague")
    assert store.read(submission).state == "withdrawn"


def test_an_author_who_reviews_may_revoke(store: Store, loop: LoopView) -> None:
    submission = store.submit("colleague")
    store.approve(submission)
    store.decide(submission, "revoke", "colleague")
    assert store.read(submission).state == "revoked"


@pytest.mark.parametrize("person", ["reviewer", "auditor", "administrator"])
def test_only_a_submitter_installs(store: Store, loop: LoopView, person: str) -> None:
    submission = _approved(store)
    with pytest.raises(NotAllowed):
        store.install(submission, person)


def test_the_service_itself_takes_steps_that_nobody_may_ask_for(store: Store, loop: LoopView) -> None:
    with pytest.raises(NotAllowed):
        lifecycle.check_who("supersede", store.actor("outsider"), frozenset())


@pytest.mark.parametrize(
    ("person", "actions"),
    [
        ("submitter", ("withdraw",)),
        ("reviewer", ("approve", "reject")),
        ("colleague", ("approve", "reject")),
        ("auditor", ()),
        ("administrator", ()),
    ],
)
def test_a_view_says_what_its_reader_may_do_next(
    store: Store, loop: LoopView, person: str, actions: tuple[Action, ...]
) -> None:
    assert store.read(store.submit(), person).open_actions == actions


def test_states_that_the_clock_makes_are_never_stored() -> None:
    read = {rule.reads for rule in lifecycle.CLOCK}
    assert read.isdisjoint({row.target for row in lifecycle.TABLE} | set(lifecycle.START.values()))


def test_the_diagram_in_the_developers_guide_is_the_table() -> None:
    guide = (Path(__file__).parents[2] / "DEVELOPERS.md").read_text(encoding="utf-8")
    assert f"```mermaid\n{lifecycle.diagram()}\n```" in guide
