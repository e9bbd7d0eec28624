"""Changes of what approvals rest on: what takes two people, who proposes and who confirms."""

from __future__ import annotations

from datetime import timedelta
from typing import Any

import pytest
from sqlalchemy.exc import IntegrityError

from service.records import change_queries, changes, history, loops
from service.records.change_queries import ChangeFilter
from service.records.errors import (
    FieldErrors,
    NotAllowed,
    NotFound,
    NotIndependent,
    SecondPersonNeeded,
    StaleContent,
    WrongPassword,
    WrongStep,
)
from service.records.tables.changes import LoopChangeDecision
from service.records.views import LoopView
from service.verification.verifier import verify
from tests.records.store import WIDER, Store, gains, password_of, registration

LIMITS = {"gain_margin_min": 2.5, "max_sensitivity_max": 1.8}


def change_loop(store: Store, loop: LoopView, revision: int = 1, **changed: Any) -> LoopView:
    with store.database.writing() as session:
        return loops.change(
            session,
            store.actor("submitter"),
            loop.id,
            registration(**changed),
            "as it is in the plant",
            revision,
            store.clock(),
        )


@pytest.fixture
def limited(store: Store) -> LoopView:
    """A loop with limits of its own, two of them, and a model."""
    loop = store.register(criteria=LIMITS, fail_position="closed")
    store.add_model(loop)
    return loop


OWN = {"criteria": LIMITS, "fail_position": "closed"}


@pytest.mark.parametrize(
    ("changed", "field"),
    [
        ({"pv": WIDER}, "/pv"),
        ({"pv": {"low": 0.0, "high": 40.0, "unit": "l/h"}}, "/pv"),
        ({"output": {"low": 0.0, "high": 90.0, "unit": "%"}}, "/output"),
        ({"fail_position": "open"}, "/fail_position"),
        ({"criteria": {"gain_margin_min": 2.5}}, "/criteria"),
        ({"criteria": LIMITS | {"gain_margin_min": 2.4}}, "/criteria"),
        ({"criteria": LIMITS | {"max_sensitivity_max": 1.9}}, "/criteria"),
        ({"criteria": None}, "/criteria"),
    ],
)
def test_one_person_alone_does_not_change_what_an_approval_rests_on(
    store: Store, limited: LoopView, changed: dict[str, Any], field: str
) -> None:
    before = store.counts()
    with pytest.raises(SecondPersonNeeded) as refused:
        change_loop(store, limited, **(OWN | changed))
    assert {problem.pointer for problem in refused.value.errors} == {field}
    assert store.counts() == before


@pytest.mark.parametrize(
    "changed",
    [
        {"description": "feed, renamed"},
        {"service_class": "flow"},
        {"safety_related": True},
        {"criteria": LIMITS | {"gain_margin_min": 2.6}},
        {"criteria": LIMITS | {"phase_margin_deg_min": 10.0}},
        {"criteria": LIMITS | {"max_sensitivity_max": 1.7}},
    ],
)
def test_what_makes_approvals_no_easier_needs_one_person(
    store: Store, limited: LoopView, changed: dict[str, Any]
) -> None:
    assert change_loop(store, limited, **(OWN | changed)).revision == 2


def test_taking_safety_related_off_needs_a_second_person(store: Store) -> None:
    loop = store.register(safety_related=True)
    with pytest.raises(SecondPersonNeeded, match="one approval will be enough"):
        change_loop(store, loop)


def test_an_inner_loop_set_or_taken_away_needs_a_second_person(store: Store) -> None:
    store.register(tag="FIC-9")
    loop = store.register()
    with pytest.raises(SecondPersonNeeded, match="set point of another loop"):
        change_loop(store, loop, inner_loop={"site": "North", "tag": "FIC-9"})


def test_limits_of_its_own_in_place_of_the_services_floors_are_not_one_persons(
    store: Store, loop: LoopView
) -> None:
    # the floors follow the loop's dead time, so that no list of limits can be known to be as tight
    strict = {
        "gain_margin_min": 3.0,
        "gain_reduction_margin_max": 0.3,
        "phase_margin_deg_min": 60.0,
        "max_sensitivity_max": 1.5,
    }
    with pytest.raises(SecondPersonNeeded, match="delay margin"):
        change_loop(store, loop, criteria=strict)


def test_a_confirmed_change_is_the_loops_next_revision(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    assert (change.state, change.open_decisions) == ("awaiting_confirmation", ("withdraw",))
    confirmed = store.decide_change(change)
    with store.database.reading() as session:
        present = loops.find(session, store.actor("auditor"), loop.id)
        first = loops.find(session, store.actor("auditor"), loop.id, revision=1)
    assert confirmed.state == "confirmed"
    assert confirmed.decision is not None
    assert confirmed.decision.decision.signed_by.name == "reviewer"
    assert (present.revision, present.loop.pv.high, first.loop.pv.high) == (2, 60.0, 40.0)
    assert store.events()[-2:] == ["loop_change_proposed", "loop_change_confirmed"]


@pytest.mark.parametrize("person", ["submitter", "administrator"])
def test_who_may_change_a_loop_may_propose(store: Store, loop: LoopView, person: str) -> None:
    assert store.propose(loop, person).content.proposed_by.name == person


@pytest.mark.parametrize("person", ["reviewer", "auditor"])
def test_who_may_not_change_a_loop_proposes_nothing(store: Store, loop: LoopView, person: str) -> None:
    with pytest.raises(NotAllowed):
        store.propose(loop, person)


@pytest.mark.parametrize("decision", ["confirm", "reject"])
def test_nobody_decides_on_their_own_change(store: Store, loop: LoopView, decision: str) -> None:
    change = store.propose(loop, "colleague")
    with pytest.raises(NotIndependent):
        store.decide_change(change, decision, "colleague")
    assert store.read_change(change).state == "awaiting_confirmation"


def test_the_database_itself_refuses_an_author_who_confirms(store: Store, loop: LoopView) -> None:
    change, actor = store.propose(loop, "colleague"), store.actor("colleague")
    row = LoopChangeDecision(
        change_id=change.id,
        decision="confirm",
        decided_by=actor.account_id,
        decided_at=store.clock(),
        change_digest=change.content_digest,
        content=b"{}",
        content_digest="0" * 64,
    )
    with pytest.raises(IntegrityError, match="own change"), store.database.writing() as session:
        history.append(session, kind="x", actor=actor, content={}, now=store.clock(), rows=(row,))


@pytest.mark.parametrize("person", ["auditor", "administrator"])
def test_a_role_that_signs_nothing_confirms_nothing(store: Store, loop: LoopView, person: str) -> None:
    change = store.propose(loop)
    with pytest.raises(NotAllowed):
        store.decide_change(change, person=person)


def test_a_change_outside_ones_areas_is_not_there(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    with pytest.raises(NotFound):
        store.read_change(change, "outsider")
    with pytest.raises(NotFound):
        store.decide_change(change, person="outsider")
    with store.database.reading() as session:
        assert change_queries.changes(session, store.actor("outsider"), ChangeFilter()).items == ()


def test_a_wrong_password_signs_nothing_and_leaves_its_trace(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    with pytest.raises(WrongPassword) as refused:
        store.decide_change(change, password=password_of("submitter"))
    with store.database.writing() as session:
        reviewer = store.actor("reviewer")
        changes.record_refused_signing(session, reviewer, change.id, refused.value, store.clock())
    assert store.read_change(change).state == "awaiting_confirmation"
    assert store.events()[-1] == "signing_refused"


def test_another_content_than_the_one_that_was_read_is_not_signed(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    with pytest.raises(StaleContent):
        store.decide_change(change, content_digest="0" * 64)


def test_a_change_of_a_loop_that_moved_meanwhile_is_not_confirmed(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    change_loop(store, loop, description="feed, renamed")
    assert store.read_change(change).state == "overtaken"
    with pytest.raises(WrongStep, match="propose it again"):
        store.decide_change(change)
    assert store.decide_change(change, "reject").state == "rejected"


def test_of_two_changes_from_one_revision_the_first_confirmed_holds(store: Store, loop: LoopView) -> None:
    first, second = store.propose(loop), store.propose(loop, fail_position="open")
    store.decide_change(first)
    with pytest.raises(WrongStep):
        store.decide_change(second)
    assert store.decide_change(second, "withdraw", "submitter").state == "withdrawn"


@pytest.mark.parametrize("decision", ["confirm", "reject", "withdraw"])
def test_a_decision_on_a_change_is_final(store: Store, loop: LoopView, decision: str) -> None:
    change = store.propose(loop)
    store.decide_change(change, decision, "submitter" if decision == "withdraw" else "reviewer")
    for again, person in (("confirm", "second"), ("reject", "second"), ("withdraw", "submitter")):
        with pytest.raises(WrongStep):
            store.decide_change(change, again, person)


def test_only_the_author_withdraws(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    with pytest.raises(NotAllowed):
        store.decide_change(change, "withdraw", "reviewer")


def test_a_proposal_from_another_revision_is_stale(store: Store, loop: LoopView) -> None:
    with pytest.raises(StaleContent):
        store.propose(loop, revision=2)


def test_a_proposal_that_changes_nothing_is_refused(store: Store, loop: LoopView) -> None:
    with pytest.raises(FieldErrors, match="nothing would change"):
        store.propose(loop, description="feed to the dryer")


def test_what_one_person_could_change_may_be_proposed_all_the_same(store: Store, loop: LoopView) -> None:
    change = store.propose(loop, description="feed, renamed")
    assert change.content.needs_second_person == ()
    assert store.decide_change(change).state == "confirmed"


def test_every_row_of_a_change_is_vouched_for(store: Store, loop: LoopView) -> None:
    running = store.submit(kind="baseline", controller=gains(1.0))
    submission = store.submit()
    change = store.propose(loop)
    store.decide_change(change)
    store.decide_change(store.propose(loop, revision=2, retire="normal"))
    store.clock.forward(hours=1)
    counts = store.counts()
    assert counts["submission_contents"] == 2
    assert counts["rechecks_due"] == 2
    assert counts["loop_change_decisions"] == 2
    assert store.read(running).recheck_due is not None
    assert store.read(submission).verdict is None
    report = verify(store.url)
    assert report.holds, report.fault
    assert {"loop_changes", "loop_change_decisions", "submission_contents", "rechecks_due"} <= set(
        report.covered
    )


def test_changes_are_listed_by_state_and_page_by_page(store: Store, loop: LoopView) -> None:
    made = [store.propose(loop, pv={"low": 0.0, "high": high, "unit": "m3/h"}) for high in (50.0, 60.0, 70.0)]
    store.decide_change(made[0], "reject")
    actor = store.actor("auditor")
    with store.database.reading() as session:
        first = change_queries.changes(session, actor, ChangeFilter(loop_id=loop.id), limit=2)
        rest = change_queries.changes(session, actor, ChangeFilter(site="NORTH"), first.after, limit=2)
        waiting = change_queries.changes(session, actor, ChangeFilter(state="awaiting_confirmation"))
        none = change_queries.changes(session, actor, ChangeFilter(tag="FIC-102"))
    assert [view.id for view in (*first.items, *rest.items)] == [view.id for view in reversed(made)]
    assert {view.id for view in waiting.items} == {made[1].id, made[2].id}
    assert (rest.after, none.items) == (None, ())


def test_the_time_of_a_change_is_the_stores(store: Store, loop: LoopView) -> None:
    change = store.propose(loop)
    store.clock.forward(hours=2)
    confirmed = store.decide_change(change)
    assert confirmed.decision is not None
    apart = confirmed.decision.decision.signed_at - confirmed.content.proposed_at
    assert apart == timedelta(hours=2)
