"""What a store adds up to, counted."""

from __future__ import annotations

from service.records.lifecycle import EMERGENCY_REVIEW_WITHIN
from service.records.queries import SubmissionFilter, submissions
from service.records.standing import Standing, standing
from service.records.views import SubmissionView
from tests.records.store import Store, gains


def counted(store: Store) -> Standing:
    with store.database.reading() as session:
        return standing(session, store.clock())


def emergency(store: Store, proportional: float) -> SubmissionView:
    return store.submit(kind="emergency", controller=gains(proportional))


def test_an_emergency_review_is_overdue_past_its_time_and_no_more_once_it_is_done(store: Store) -> None:
    store.add_model(store.register())
    first = emergency(store, 1.4)
    store.clock.forward(seconds=EMERGENCY_REVIEW_WITHIN.total_seconds())
    emergency(store, 1.3)
    assert counted(store).overdue_emergency_reviews == 0
    store.clock.forward(seconds=1)
    assert counted(store).overdue_emergency_reviews == 1
    store.approve(first)
    assert counted(store).overdue_emergency_reviews == 0


def test_submissions_are_counted_by_verdict_and_entries_as_the_history_has_them(store: Store) -> None:
    store.register()
    store.submit()
    store.add_model(store.register(tag="FIC-102"))
    for proportional in (1.0, 1.5, 40.0):
        store.submit(controller=gains(proportional), loop={"site": "North", "tag": "FIC-102"})
    found = counted(store)
    assert found.submissions == {"no_model": 1, "stable": 2, "unstable": 1}
    with store.database.reading() as session:
        listed = submissions(session, store.actor("reviewer"), SubmissionFilter(), store.clock())
    assert sum(found.submissions.values()) == len(listed.items)
    assert found.entries == listed.items[0].entry.number
    assert found.last_entry_at == listed.items[0].entry.time
