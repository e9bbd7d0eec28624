"""What was typed in last is told beside what is in force, until it is put right."""

from __future__ import annotations

import pytest

from service.records import left_otherwise, queries
from service.records.errors import NotFound
from service.records.queries import SubmissionFilter
from service.records.views import LoopView, SubmissionView
from tests.records.store import Store, gains


def left(store: Store, loop: LoopView) -> str | None:
    """The submission whose gains were left otherwise; the loop and the lists say the same."""
    wanted = SubmissionFilter(left_otherwise=True, loop_id=loop.id)
    with store.database.reading() as session:
        actor = store.actor("auditor")
        found = left_otherwise.of_loop(session, actor, loop.id)
        listed = queries.submissions(session, actor, wanted, store.clock()).items
        not_listed = queries.submissions(
            session, actor, SubmissionFilter(left_otherwise=False, loop_id=loop.id), store.clock()
        ).items
        every = queries.submissions(session, actor, SubmissionFilter(loop_id=loop.id), store.clock()).items
    assert len(listed) + len(not_listed) == len(every)
    if found is None:
        assert listed == ()
        return None
    assert found.installation.submission_id in {line.id for line in listed}
    assert any(difference.hinders for difference in found.installation.differences)
    return found.installation.submission_id


def approved(store: Store, **changes: object) -> SubmissionView:
    submission = store.submit(**changes)
    store.approve(submission)
    return submission


def test_a_wrong_number_is_told_though_nothing_is_in_force(store: Store, loop: LoopView) -> None:
    assert left(store, loop) is None
    submission = approved(store)
    assert left(store, loop) is None
    store.install(submission, as_left=gains(15.0))
    assert left(store, loop) == submission.id


def test_the_same_gains_left_right_put_it_right(store: Store, loop: LoopView) -> None:
    submission = approved(store)
    store.install(submission, as_left=gains(15.0))
    store.install(submission)
    assert left(store, loop) is None
    # and once more, while they are in force by the record
    store.install(submission, as_left=gains(0.15))
    assert left(store, loop) == submission.id
    assert store.read(submission).state == "in_force"
    store.install(submission)
    assert left(store, loop) is None


@pytest.mark.parametrize("kind", ["baseline", "emergency"])
def test_gains_that_run_from_the_start_put_it_right(store: Store, loop: LoopView, kind: str) -> None:
    submission = approved(store)
    store.install(submission, as_left=gains(2.0))
    store.submit(kind=kind, controller=gains(2.0))
    assert left(store, loop) is None


def test_half_a_schedule_does_not_put_it_right(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="low load")
    sets = [
        {"condition": name, "operating_points": [point], "controller": gains(gain)}
        for name, point, gain in (("high", "normal", 1.5), ("low", "low load", 1.2))
    ]
    submission = approved(store, controller=None, gain_sets=sets)

    def install(condition: str, gain: float) -> None:
        typed = {"condition": condition, "as_found": gains(1.0), "as_left": gains(gain)}
        store.install(submission, as_found=None, as_left=None, gain_sets=[typed])

    install("high", 15.0)
    install("low", 1.2)
    assert left(store, loop) == submission.id
    install("high", 1.5)
    assert left(store, loop) is None


def test_another_loop_is_another_matter(store: Store, loop: LoopView) -> None:
    other = store.register(tag="FIC-102")
    store.add_model(other)
    store.install(approved(store), as_left=gains(15.0))
    assert left(store, other) is None
    store.install(approved(store, loop={"site": "North", "tag": "FIC-102"}))
    assert left(store, loop) is not None


def test_it_is_not_told_to_whoever_does_not_see_the_loop(store: Store, loop: LoopView) -> None:
    store.install(approved(store), as_left=gains(15.0))
    with store.database.reading() as session, pytest.raises(NotFound):
        left_otherwise.of_loop(session, store.actor("outsider"), loop.id)
