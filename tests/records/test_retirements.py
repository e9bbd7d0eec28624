"""An operating point is retired by two people, and only while it is as they read of it."""

from __future__ import annotations

import pytest

from service.records import loops
from service.records.errors import FieldErrors, WrongStep
from service.records.views import LoopView
from tests.records.store import Store


def test_an_operating_point_is_retired_by_two(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load")
    change = store.propose(loop, retire="HIGH load")
    assert change.content.retires is not None
    store.decide_change(change)
    with store.database.reading() as session:
        found = loops.models(session, store.actor("auditor"), loop.id)
    assert [(m.version, m.operating_point, m.in_force, m.retired) for m in found] == [
        (3, "high load", False, True),
        (2, "high load", False, False),
        (1, "normal", True, False),
    ]


def test_a_model_added_later_brings_an_operating_point_back(store: Store, loop: LoopView) -> None:
    store.decide_change(store.propose(loop, retire="normal"))
    assert store.submit().verdict is None
    store.add_model(loop)
    assert store.submit().verdict == "stable"


def test_an_operating_point_without_a_model_is_not_retired(store: Store, loop: LoopView) -> None:
    with pytest.raises(FieldErrors, match="no model in force"):
        store.propose(loop, retire="low load")


def test_a_retirement_is_overtaken_by_a_newer_model_of_its_point(store: Store, loop: LoopView) -> None:
    change = store.propose(loop, retire="normal")
    store.add_model(loop, gain=1.1)
    assert store.read_change(change).state == "overtaken"
    with pytest.raises(WrongStep):
        store.decide_change(change)
