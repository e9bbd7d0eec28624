"""At the scans too a verdict is reached twice: with either route broken on purpose the loop is undecided."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from service.analysis import sampled
from service.analysis.controller import Scan
from service.analysis.recomputation import recompute
from tests.analysis.entered import first_order, ideal
from tests.analysis.test_two_routes import FAULTS, Fault, assert_says_nothing_more

SCAN = Scan(interval_s=0.4)
STABLE_LOOP = first_order(1.0, 5.0, 1.1), ideal(2.0, 5.0, scan=SCAN)
# unstable by its scan only
UNSTABLE_LOOP = first_order(1.0, 5.0), ideal(40.0, 5.0, scan=SCAN)


def break_encirclements(monkeypatch: pytest.MonkeyPatch, fault: Fault) -> None:
    whole = sampled.count_right_of_axis
    monkeypatch.setattr(sampled, "count_right_of_axis", lambda axis: fault(whole(axis)))


def break_roots(monkeypatch: pytest.MonkeyPatch, fault: Fault) -> None:
    whole = sampled.sampled_roots

    def broken(*given: Any) -> Any:
        found = whole(*given)
        return replace(found, count=fault(found.count))

    monkeypatch.setattr(sampled, "sampled_roots", broken)


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
    assert result.continuous.stability.verdict == "stable"
    assert result.sampled is not None
    assert_says_nothing_more(result.sampled)


@every_route
@pytest.mark.parametrize("fault", FAULTS)
def test_a_loop_that_only_its_scan_makes_unstable_is_undecided_too(
    route: str, fault: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert recompute(*UNSTABLE_LOOP).verdict == "unstable"
    ROUTES[route](monkeypatch, FAULTS[fault])
    result = recompute(*UNSTABLE_LOOP)
    assert result.verdict == "undecided"
    assert result.sampled is not None
    assert_says_nothing_more(result.sampled)


@every_route
@pytest.mark.parametrize("error", [np.linalg.LinAlgError, OverflowError, ZeroDivisionError])
def test_a_route_that_fails_in_its_arithmetic_leaves_the_loop_undecided(
    route: str, error: type[Exception], monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(_count: Any) -> Any:
        raise error

    ROUTES[route](monkeypatch, fail)
    result = recompute(*STABLE_LOOP)
    assert result.verdict == "undecided"
    assert result.sampled is not None
    assert_says_nothing_more(result.sampled)


def test_the_two_routes_have_names_of_their_own() -> None:
    result = recompute(*STABLE_LOOP)
    assert result.sampled is not None
    every = result.sampled.stability.routes + result.continuous.stability.routes
    assert len({route.method for route in every}) == 4
    assert {route.verdict for route in every} == {"stable"}
