"""A verdict is reached twice: with either route broken on purpose the loop is undecided, never stable."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from service.analysis import stability
from service.analysis.nyquist import Count
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis
from tests.analysis.entered import first_order, ideal

Fault = Callable[[Count], Count]

STABLE_LOOP = first_order(1.0, 5.0, 1.0), ideal(2.0, 5.0)
UNSTABLE_LOOP = first_order(1.0, 5.0, 1.0), ideal(20.0, 5.0)

FAULTS: dict[str, Fault] = {
    "one too many": lambda count: replace(count, roots=(count.roots or 0) + 1),
    "one too few": lambda count: replace(count, roots=(count.roots or 0) - 1),
    "none at all": lambda count: replace(count, roots=0),
    "no answer": lambda count: Count(None, reason="broken on purpose"),
    "infinitely many": lambda count: Count(None, infinitely_many=True),
}


def break_encirclements(monkeypatch: pytest.MonkeyPatch, fault: Fault) -> None:
    whole = stability.count_right_of_axis
    monkeypatch.setattr(stability, "count_right_of_axis", lambda axis: fault(whole(axis)))


def break_roots(monkeypatch: pytest.MonkeyPatch, fault: Fault) -> None:
    whole = stability.characteristic_roots

    def broken(*given: Any) -> Any:
        found = whole(*given)
        return replace(found, count=fault(found.count))

    monkeypatch.setattr(stability, "characteristic_roots", broken)


ROUTES = {"encirclements": break_encirclements, "roots": break_roots}

every_route = pytest.mark.parametrize("route", ROUTES)


@every_route
@pytest.mark.parametrize("fault", [name for name in FAULTS if name != "none at all"])
def test_a_stable_loop_is_undecided_where_one_route_is_broken(
    route: str, fault: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert recompute(*STABLE_LOOP).verdict == "stable"
    ROUTES[route](monkeypatch, FAULTS[fault])
    result = recompute(*STABLE_LOOP)
    assert result.verdict == "undecided"
    assert_says_nothing_more(result.continuous)


@every_route
@pytest.mark.parametrize("fault", FAULTS)
def test_an_unstable_loop_is_undecided_where_one_route_is_broken(
    route: str, fault: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert recompute(*UNSTABLE_LOOP).verdict == "unstable"
    ROUTES[route](monkeypatch, FAULTS[fault])
    result = recompute(*UNSTABLE_LOOP)
    assert result.verdict == "undecided"
    assert_says_nothing_more(result.continuous)


@every_route
def test_each_route_keeps_its_own_answer_beside_the_verdict(
    route: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    ROUTES[route](monkeypatch, FAULTS["one too many"])
    told = recompute(*STABLE_LOOP).continuous.stability.routes
    assert len({answer.method for answer in told}) == 2
    assert sorted((answer.verdict, answer.unstable_roots) for answer in told) == [
        ("stable", 0),
        ("unstable", 1),
    ]


@every_route
@pytest.mark.parametrize("error", [np.linalg.LinAlgError, OverflowError, ZeroDivisionError])
def test_a_route_that_fails_in_its_arithmetic_leaves_the_loop_undecided(
    route: str, error: type[Exception], monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(_count: Count) -> Count:
        raise error

    ROUTES[route](monkeypatch, fail)
    result = recompute(*STABLE_LOOP)
    assert result.verdict == "undecided"
    assert_says_nothing_more(result.continuous)


def test_two_routes_are_undecided_where_neither_has_an_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    for break_route in ROUTES.values():
        break_route(monkeypatch, FAULTS["no answer"])
    result = recompute(*STABLE_LOOP)
    assert result.verdict == "undecided"
    assert result.continuous.stability.reason == "broken on purpose"


def assert_says_nothing_more(analysis: Analysis) -> None:
    assert analysis.stability.verdict == "undecided"
    assert analysis.stability.unstable_roots is None
    assert analysis.stability.reason
    assert analysis.margins is analysis.setpoint_step is analysis.load_step is analysis.noise is None
