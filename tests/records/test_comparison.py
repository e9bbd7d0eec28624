"""Two controllers held against one another."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.analysis.controller import Controller, IdealController
from service.analysis.plant import Range, Ranges
from service.documents.installations import InstallationRequest
from service.documents.reading import read
from service.records import comparison
from tests.records.store import gains

RANGES = Ranges(pv=Range(low=0.0, high=40.0), output=Range(low=0.0, high=100.0))


def _read(document: dict[str, Any]) -> Controller:
    whole = {"as_found": document, "as_left": document, "installed_at": "2026-03-02T06:00:00Z"}
    return read(InstallationRequest, whole).as_left


def _controller(**changes: Any) -> IdealController:
    controller = _read(gains(2.0, integral={"value": 40.0, "unit": "seconds"}) | changes)
    assert isinstance(controller, IdealController)
    return controller


def _changed(before: Controller | None, after: Controller) -> dict[str, tuple[object, object, float | None]]:
    compared = comparison.compare(before, after, RANGES)
    return {c.setting: (c.before, c.after, c.percent) for c in compared.settings if c.changed}


def test_a_term_that_is_new_leaves_the_others_as_they_were_entered() -> None:
    with_derivative = _controller(
        proportional={"value": 2.5, "unit": "gain"},
        derivative={"value": 3.0, "unit": "seconds"},
        derivative_filter={"value": 10.0, "unit": "ratio"},
    )
    compared = comparison.compare(_controller(), with_derivative, RANGES)
    assert compared.common_form is None
    assert _changed(_controller(), with_derivative) == {
        "proportional": (2.0, 2.5, 25.0),
        "derivative": (None, 3.0, None),
        "derivative_filter": (None, 10.0, None),
    }


def test_a_term_that_is_gone_has_nothing_after() -> None:
    assert _changed(_controller(), _controller(integral=None)) == {"integral": (40.0, None, None)}


def test_another_unit_brings_all_terms_to_one_form() -> None:
    in_minutes = _controller(integral={"value": 1.0, "unit": "minutes"})
    compared = comparison.compare(_controller(), in_minutes, RANGES)
    assert compared.common_form == "parallel"
    changed = {c.setting: c.percent for c in compared.settings if c.changed}
    assert changed == {"integral": pytest.approx(-100.0 / 3.0)}


def test_where_nothing_was_before_everything_is_new() -> None:
    changed = _changed(None, _controller())
    assert changed["proportional"] == (None, 2.0, None)
    assert not comparison.compare(None, _controller(), RANGES).same_gains


def test_what_a_display_shows_is_no_gain() -> None:
    shown = _controller(proportional={"value": 2.0, "unit": "gain", "displayed": "2.0"})
    assert comparison.compare(_controller(), shown, RANGES).same_gains


positive = st.floats(min_value=1e-3, max_value=1e3)


@given(positive, positive, positive, positive, st.floats(min_value=0.0, max_value=2.0))
def test_an_ideal_controller_and_its_parallel_form_are_the_same_gains(
    kc: float, ti: float, td: float, tf: float, weight: float
) -> None:
    surroundings = {"setpoint_weight": {"proportional": weight, "derivative": 0.0}}
    seconds = {"unit": "seconds"}
    ideal = gains(
        kc,
        integral=seconds | {"value": ti},
        derivative=seconds | {"value": td},
        derivative_filter=seconds | {"value": tf},
        **surroundings,
    )
    parallel = ideal | {
        "form": "parallel",
        "integral": {"value": kc / ti, "unit": "gain_per_second"},
        "derivative": {"value": kc * td, "unit": "gain_seconds"},
    }
    one, other = _read(ideal), _read(parallel)
    assert comparison.same_gains(one, other, RANGES)
    assert comparison.same_gains(other, one, RANGES)


@given(positive, positive, st.floats(min_value=1e-8, max_value=1.0))
def test_a_difference_past_the_tolerance_is_found_in_any_unit(kc: float, ti: float, by: float) -> None:
    one = _controller(proportional={"value": kc, "unit": "gain"}, integral={"value": ti, "unit": "seconds"})
    band = {"value": 100.0 / (kc * (1 + by)), "unit": "percent_band"}
    other = replace(one, proportional=_controller(proportional=band).proportional)
    assert not comparison.same_gains(one, other, RANGES)
    assert any(difference.hinders for difference in comparison.differences(one, other, RANGES))
