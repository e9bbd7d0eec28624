"""States and gains in force as rows: numbered from 1 without gaps, the last of each the one that holds."""

from __future__ import annotations

from datetime import timedelta

from service.records import states
from service.records.tables.submissions import GainsComingIntoForce, Submission, SubmissionState
from service.records.views import LoopView
from tests.records.store import Store, gains


def test_states_and_gains_in_force_are_numbered_without_gaps(store: Store, loop: LoopView) -> None:
    first = store.submit()
    store.approve(first)
    store.install(first)
    for proportional in (1.1, 1.2):
        store.submit(kind="emergency", controller=gains(proportional))
    with store.database.reading() as session:
        rows = session.query(SubmissionState).filter_by(submission_id=first.id)
        assert {row.ordinal: (row.action, row.state) for row in rows} == {
            1: ("submit", "awaiting_review"),
            2: ("approve", "approved"),
            3: ("install", "in_force"),
            4: ("supersede", "superseded"),
        }
        in_force = session.query(GainsComingIntoForce).filter_by(loop_id=loop.id)
        numbers = {row.submission_id: row.ordinal for row in in_force}
    assert (sorted(numbers.values()), numbers[first.id]) == ([1, 2, 3], 1)


def test_what_runs_is_what_came_into_force_last_and_what_ran_before_has_run(
    store: Store, loop: LoopView
) -> None:
    with store.database.reading() as session:
        assert states.running(session, loop.id) is None
    before, present = (
        store.submit(kind="emergency", controller=gains(proportional)) for proportional in (1.1, 1.2)
    )
    waiting = store.submit()
    with store.database.reading() as session:
        running = states.running(session, loop.id)
        assert running is not None
        assert running.submission_id == present.id
        ran = [states.has_run(session, loop.id, each.id) for each in (before, present, waiting)]
        runs = session.query(Submission).filter(states.runs()).all()
    assert ran == [True, True, False]
    assert [row.id for row in runs] == [present.id]


def test_the_submissions_of_a_loop_are_told_each_in_its_last_state_the_earliest_first(
    store: Store, loop: LoopView
) -> None:
    store.add_model(store.register(tag="LIC-7"))
    first = store.submit()
    store.approve(first)
    store.install(first)
    store.submit(loop={"site": "North", "tag": "LIC-7"})
    second = store.submit(kind="emergency", controller=gains(1.1))
    third = store.submit(controller=gains(1.2))
    with store.database.reading() as session:
        found = states.of_loop(session, loop.id, store.clock())
        assert list(found.items()) == [
            (first.id, "superseded"),
            (second.id, "installed_awaiting_review"),
            (third.id, "awaiting_review"),
        ]
        assert {each: states.stored(session, each).state for each in found} == found


def test_of_two_loops_each_has_gains_of_its_own_that_run(store: Store, loop: LoopView) -> None:
    other = store.register(tag="LIC-7")
    store.add_model(other)
    mine = store.submit(kind="emergency")
    theirs = [
        store.submit(kind="emergency", loop={"site": "North", "tag": "LIC-7"}, controller=gains(proportional))
        for proportional in (1.1, 1.2)
    ]
    with store.database.reading() as session:
        assert {row.id for row in session.query(Submission).filter(states.runs())} == {mine.id, theirs[-1].id}
        for each, submission in ((loop, mine), (other, theirs[-1])):
            running = states.running(session, each.id)
            assert running is not None
            assert running.submission_id == submission.id
        assert not states.has_run(session, other.id, mine.id)


def test_an_emergency_is_overdue_once_its_review_is_due(store: Store, loop: LoopView) -> None:
    submission = store.submit(kind="emergency")
    due_at = store.clock() + timedelta(hours=72)
    with store.database.reading() as session:
        row = session.get_one(Submission, submission.id)
        last = states.stored(session, submission.id)
        assert states.is_overdue(last, row, due_at, due_at + timedelta(seconds=1)) is True
        assert states.is_overdue(last, row, due_at, due_at) is False
