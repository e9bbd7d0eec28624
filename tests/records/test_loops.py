"""Loops, revisions and models."""

from __future__ import annotations

import pytest

from service.records import loops, queries
from service.records.errors import AlreadyExists, FieldErrors, NotAllowed, NotFound, StaleContent
from service.records.queries import HistoryFilter
from service.records.views import LoopView
from tests.records.store import Store, registration


def test_a_loop_is_kept_as_typed_and_known_without_regard_to_case(store: Store) -> None:
    loop = store.register(tag="Fic-101")
    with store.database.reading() as session:
        found = loops.find_by_tag(session, store.actor("auditor"), "NORTH", "FIC-101")
    assert (found.id, found.loop.tag) == (loop.id, "Fic-101")


def test_site_and_tag_are_unique_together(store: Store, loop: LoopView) -> None:
    with pytest.raises(AlreadyExists):
        store.register(tag="fic-101")
    assert store.register(site="South").revision == 1


@pytest.mark.parametrize("person", ["reviewer", "auditor"])
def test_who_neither_submits_nor_administers_registers_nothing(store: Store, person: str) -> None:
    with pytest.raises(NotAllowed):
        store.register(person)


def test_all_that_a_loop_refers_to_is_checked_at_once(store: Store) -> None:
    with pytest.raises(FieldErrors) as refused:
        store.register("outsider", inner_loop={"site": "North", "tag": "FIC-999"})
    assert [problem.pointer for problem in refused.value.errors] == ["/area", "/inner_loop"]


def test_an_inner_loop_outside_ones_areas_is_not_there(store: Store, loop: LoopView) -> None:
    inner = {"site": "North", "tag": "FIC-101"}
    with pytest.raises(FieldErrors):
        store.register("outsider", tag="TIC-1", area="Tank farm", inner_loop=inner)
    assert store.register(tag="TIC-1", inner_loop=inner).revision == 1


def test_a_change_is_a_new_revision_and_the_earlier_one_stays(store: Store, loop: LoopView) -> None:
    with store.database.writing() as session:
        changed = loops.change(
            session,
            store.actor("submitter"),
            loop.id,
            registration(description="feed, renamed"),
            "the dryer was renamed",
            1,
            store.clock(),
        )
    with store.database.reading() as session:
        kept = loops.revisions(session, store.actor("auditor"), loop.id)
        first = loops.find(session, store.actor("auditor"), loop.id, revision=1)
    assert [view.revision for view in kept] == [2, 1]
    assert (changed.loop.description, first.loop.description) == ("feed, renamed", "feed to the dryer")
    with store.database.reading() as session:
        wanted = HistoryFilter(kind="loop_changed")
        (told,) = queries.history(session, store.actor("auditor"), wanted).items
    assert told.content["reason"] == "the dryer was renamed"


def test_a_change_of_a_revision_that_is_no_longer_the_present_one_is_stale(
    store: Store, loop: LoopView
) -> None:
    with store.database.writing() as session, pytest.raises(StaleContent):
        loops.change(session, store.actor("submitter"), loop.id, registration(), "why", 2, store.clock())


@pytest.mark.parametrize(("field", "value"), [("site", "South"), ("tag", "FIC-102")])
def test_site_and_tag_stay(store: Store, loop: LoopView, field: str, value: str) -> None:
    changed = registration(**{field: value})
    with store.database.writing() as session, pytest.raises(FieldErrors) as refused:
        loops.change(session, store.actor("submitter"), loop.id, changed, "why", 1, store.clock())
    assert refused.value.errors[0].pointer == f"/{field}"


def test_a_loop_outside_ones_areas_is_not_there_for_any_call(store: Store, loop: LoopView) -> None:
    outsider = store.actor("outsider")
    with store.database.reading() as session:
        for call in (loops.find, loops.revisions, loops.models):
            with pytest.raises(NotFound):
                call(session, outsider, loop.id)
        with pytest.raises(NotFound):
            loops.find_by_tag(session, outsider, "North", "FIC-101")


def test_a_model_takes_the_place_of_the_earlier_one_of_its_operating_point(
    store: Store, loop: LoopView
) -> None:
    store.add_model(loop, operating_point="high load")
    store.add_model(loop, operating_point="NORMAL")
    with store.database.reading() as session:
        found = loops.models(session, store.actor("auditor"), loop.id)
    assert [(m.version, m.operating_point, m.in_force) for m in found] == [
        (3, "NORMAL", True),
        (2, "high load", True),
        (1, "normal", False),
    ]
