"""Lists, filters, pages of lists, and what lies outside one's areas."""

from __future__ import annotations

from collections.abc import Callable
from datetime import timedelta

import pytest

from service.issuing import checkpoints
from service.records import kept_sheets, queries
from service.records.errors import Conflict, NotFound
from service.records.lifecycle import State
from service.records.queries import HistoryFilter, LoopFilter, SubmissionFilter
from service.records.views import LoopView, Page, SubmissionView
from tests.records.store import Store, gains


def _all(page: Callable[[str | None], Page]) -> list:  # type: ignore[type-arg]
    """Every item of a list, two at a time."""
    items, after = [], None
    while True:
        part = page(after)
        assert len(part.items) <= 2
        items += part.items
        after = part.after
        if after is None:
            return items


@pytest.fixture
def several(store: Store) -> list[LoopView]:
    places = [("North", "FIC-101"), ("North", "lic-7"), ("South", "FIC-101"), ("north", "TIC-3")]
    return [
        store.register(site=site, tag=tag, area="Tank farm" if tag == "lic-7" else "Drying")
        for site, tag in places
    ]


def _tags(store: Store, person: str = "auditor", **wanted: str) -> list[str]:
    with store.database.reading() as session:
        actor = store.actor(person)
        found = _all(lambda after: queries.loops(session, actor, LoopFilter(**wanted), after, 2))
    return [f"{view.loop.site} {view.loop.tag}" for view in found]


def test_loops_come_by_site_and_tag_without_regard_to_case(store: Store, several: object) -> None:
    assert _tags(store) == ["North FIC-101", "North lic-7", "north TIC-3", "South FIC-101"]


@pytest.mark.parametrize(
    ("wanted", "found"),
    [
        ({"site": "SOUTH"}, ["South FIC-101"]),
        ({"tag": "fic-101"}, ["North FIC-101", "South FIC-101"]),
        ({"area": "Tank farm"}, ["North lic-7"]),
        ({"q": "ic-1"}, ["North FIC-101", "South FIC-101"]),
        ({"q": "DRYER", "tag": "LIC-7"}, ["North lic-7"]),
        ({"q": "%"}, []),
        ({"q": "_"}, []),
    ],
)
def test_loops_are_found_by_site_tag_area_and_text(
    store: Store, several: object, wanted: dict[str, str], found: list[str]
) -> None:
    assert _tags(store, **wanted) == found


def test_an_account_with_areas_sees_those_loops_only(store: Store, several: object) -> None:
    assert _tags(store, "outsider") == ["North lic-7"]


def test_submissions_come_latest_first_and_by_state_as_read(store: Store, loop: LoopView) -> None:
    until = (store.clock() + timedelta(days=1)).isoformat()
    expired = store.submit(install_by=until)
    store.approve(expired)
    approved = store.submit()
    store.approve(approved)
    waiting = [store.submit(controller=gains(1.0 + step / 10)) for step in range(3)]
    store.clock.forward(days=2)

    def ids(*states: State) -> list[str]:
        wanted = SubmissionFilter(states=frozenset(states))
        with store.database.reading() as session:
            actor, now = store.actor("reviewer"), store.clock()
            found = _all(lambda after: queries.submissions(session, actor, wanted, now, after, 2))
        assert not states or {line.state for line in found} <= set(states)
        return [line.id for line in found]

    assert ids() == [s.id for s in (*reversed(waiting), approved, expired)]
    assert ids("awaiting_review") == [s.id for s in reversed(waiting)]
    assert ids("approved") == [approved.id]
    assert ids("expired") == [expired.id]
    assert ids("approved", "expired") == [approved.id, expired.id]


def test_what_is_past_its_time_is_told_while_it_runs_or_until_somebody_takes_it_up(
    store: Store, loop: LoopView
) -> None:
    def told() -> list[str]:
        wanted = SubmissionFilter(past_time_and_open=True)
        with store.database.reading() as session:
            found = queries.submissions(session, store.actor("reviewer"), wanted, store.clock())
        return [line.id for line in found.items]

    def approved(**changes: object) -> SubmissionView:
        submission = store.submit(**changes)
        store.approve(submission)
        return submission

    until = (store.clock() + timedelta(days=1)).isoformat()
    runs = approved(temporary_until=until)
    store.install(runs)
    expired = approved(install_by=until, controller=gains(1.1))
    assert told() == []
    store.clock.forward(days=2)
    assert told() == [expired.id, runs.id]
    # gains that still run past their time wait for somebody, however long it takes
    store.clock.forward(days=30)
    assert told() == [runs.id]
    again = approved(controller=gains(1.1))
    store.install(again, as_left=gains(1.1))
    assert told() == []
    until = (store.clock() + timedelta(days=1)).isoformat()
    unused = approved(temporary_until=until, controller=gains(1.2))
    store.clock.forward(days=2)
    assert told() == [unused.id]
    store.submit(controller=gains(1.3))
    assert told() == []


def test_what_awaits_review_has_what_runs_already_first_and_then_the_oldest(
    store: Store, loop: LoopView
) -> None:
    planned = [store.submit(controller=gains(1.0 + step / 10)) for step in range(3)]
    emergency = store.submit(kind="emergency")
    with store.database.reading() as session:
        actor, now = store.actor("reviewer"), store.clock()
        found = _all(lambda after: queries.awaiting_review(session, actor, now, after, 2))
    assert [line.id for line in found] == [s.id for s in (emergency, *planned)]


def test_lists_of_submissions_keep_to_ones_areas(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    with store.database.reading() as session:
        outsider, now = store.actor("outsider"), store.clock()
        assert queries.submissions(session, outsider, SubmissionFilter(), now).items == ()
        assert queries.awaiting_review(session, outsider, now).items == ()
        for call in (queries.content_bytes, queries.curves, kept_sheets.latest):
            with pytest.raises(NotFound):
                call(session, outsider, submission.id)
        with pytest.raises(NotFound):
            queries.submission(session, outsider, submission.id, now)
        with pytest.raises(NotFound):
            queries.gains_in_force(session, outsider, loop.id, now)


def _kinds(store: Store, person: str = "auditor", **wanted: object) -> list[str]:
    with store.database.reading() as session:
        actor = store.actor(person)
        found = _all(
            lambda after: queries.history(session, actor, HistoryFilter(**wanted), after, 2)  # type: ignore[arg-type]
        )
    return [event.kind for event in found]


def test_the_history_is_found_by_each_of_its_filters(store: Store, loop: LoopView) -> None:
    store.register(site="South", area="Tank farm")
    store.clock.forward(hours=1)
    submission = store.submit()
    store.approve(submission)
    now = store.clock()
    assert _kinds(store, site="south") == ["loop_registered"]
    assert _kinds(store, site="NORTH", tag="fic-101") == [
        "loop_registered",
        "model_added",
        "gains_submitted",
        "gains_approved",
    ]
    assert _kinds(store, area="Tank farm") == ["loop_registered"]
    assert _kinds(store, since=now) == ["gains_submitted", "gains_approved"]
    assert _kinds(store, until=now, tag="FIC-101", site="North") == ["loop_registered", "model_added"]
    assert _kinds(store, actor="reviewer") == ["gains_approved"]
    assert _kinds(store, kind="gains_submitted") == ["gains_submitted"]


def test_entries_about_accounts_are_for_auditors_and_administrators(store: Store, loop: LoopView) -> None:
    assert _kinds(store, "reviewer") == ["loop_registered", "model_added"]
    assert _kinds(store, "administrator")[:2] == ["store_made", "account_added"]


def test_an_account_with_areas_sees_entries_about_its_loops_only(store: Store, loop: LoopView) -> None:
    store.register(site="South", area="Tank farm")
    assert _kinds(store, "outsider") == ["loop_registered"]
    with store.database.reading() as session, pytest.raises(NotFound):
        queries.entry(session, store.actor("outsider"), 1)


def test_two_submissions_of_one_loop_are_compared_term_by_term(store: Store, loop: LoopView) -> None:
    first, second = store.submit(), store.submit(controller=gains(1.8))
    with store.database.reading() as session:
        found = queries.compare(session, store.actor("auditor"), second.id, first.id)
    assert found.before is not None
    assert (found.before.submission_id, found.after.submission_id) == (first.id, second.id)
    (compared,) = (gain_set.comparison for gain_set in found.gain_sets)
    changed = [(c.setting, c.unit, c.before, c.after) for c in compared.settings if c.changed]
    assert changed == [("proportional", "gain", 1.5, 1.8)]
    assert compared.settings[0].percent == pytest.approx(20.0)
    assert not compared.same_gains


def test_a_submission_is_compared_with_the_gains_that_are_in_force_now(store: Store, loop: LoopView) -> None:
    submission, actor = store.submit(), store.actor("auditor")
    with store.database.reading() as session:
        none = queries.compare(session, actor, submission.id)
    assert (none.before, none.gain_sets) == (None, ())
    running = store.submit(kind="baseline", controller=gains(1.2))
    with store.database.reading() as session:
        found = queries.compare(session, actor, submission.id)
    assert found.before is not None
    assert found.before.submission_id == running.id
    changed = [c for c in found.gain_sets[0].comparison.settings if c.changed]
    assert [(c.setting, c.before, c.after) for c in changed] == [("proportional", 1.2, 1.5)]


def test_gains_of_two_loops_are_not_compared(store: Store, loop: LoopView) -> None:
    store.add_model(store.register(tag="FIC-102"))
    other = store.submit(loop={"site": "North", "tag": "FIC-102"})
    with store.database.reading() as session, pytest.raises(Conflict):
        queries.compare(session, store.actor("auditor"), store.submit().id, other.id)


def test_a_submission_is_shown_beside_the_gains_then_in_force(store: Store, loop: LoopView) -> None:
    store.submit(kind="baseline", controller=gains(1.0))
    (compared,) = store.submit().comparisons
    assert [c.setting for c in compared.settings if c.changed] == ["proportional"]
    assert compared.common_form is None


def test_what_the_change_does_is_told_from_the_results_of_both_on_the_same_model(
    store: Store, loop: LoopView
) -> None:
    assert store.submit().effects == ()
    store.submit(kind="baseline", controller=gains(1.0))
    (effect,) = store.submit().effects
    assert any("nearer to instability" in sentence for sentence in effect.sentences)
    # the gains before were never recomputed with a model that came later
    store.add_model(loop, gain=1.1)
    assert store.submit().effects == ()


def test_gains_in_two_forms_are_shown_in_one(store: Store, loop: LoopView) -> None:
    parallel = gains(1.5, form="parallel", integral={"value": 0.15, "unit": "gain_per_second"})
    store.submit(kind="baseline", controller=parallel)
    (compared,) = store.submit().comparisons
    assert (compared.common_form, compared.same_gains) == ("parallel", True)


def test_the_sheet_kept_at_a_decision_is_found_again(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    signed = store.approve(submission)
    with store.database.writing() as session:
        kept_sheets.keep(
            session,
            store.actor("reviewer"),
            signed.decision.decision_id,
            b"%PDF-1.7",
            "renderer 1",
            made := checkpoints.checkpoint(session, None),
            store.clock(),
        )
    with store.database.reading() as session:
        assert kept_sheets.latest(session, store.actor("auditor"), submission.id) == b"%PDF-1.7"
    assert store.events()[-1] == "sheet_kept"
    assert [decision.checkpoint for decision in store.read(submission).decisions] == [made]


def test_without_a_decision_there_is_no_kept_sheet(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    with store.database.reading() as session, pytest.raises(NotFound):
        kept_sheets.latest(session, store.actor("auditor"), submission.id)
