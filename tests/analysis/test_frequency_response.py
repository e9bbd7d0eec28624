"""A plant that is known by points of its frequency response: the loop that the points tell, or no verdict."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from service.analysis.controller import Scan
from service.analysis.errors import FieldError
from service.analysis.plant import FrequencyResponse, PlantModel, Range, Ranges
from service.analysis.rational import rational
from service.analysis.recomputation import recompute
from service.analysis.results import Recomputation
from tests.analysis.entered import factors, first_order, ideal, integrating, resonant

LOOPS: dict[str, tuple[PlantModel, Any]] = {
    "a lag": (first_order(2.0, 10.0, 3.0), ideal(1.0, 10.0)),
    "a lag with too much gain": (first_order(2.0, 10.0, 3.0), ideal(4.0, 10.0)),
    "an integrator": (integrating(0.1, 2.0, 0.5), ideal(1.0, 20.0)),
    "a light resonance": (resonant(1.0, 2.0, 0.05, 0.2), ideal(0.1, 6.0)),
    "an unstable lag": (factors(0.6, [], [0.1, -2.0], 0.1), ideal(1.5, 20.0)),
    "an unstable lag with too little gain": (factors(0.6, [], [0.1, -2.0], 0.1), ideal(0.1, 20.0)),
    "an inverse response": (factors(-0.1, [0.5], [-0.2, -0.7], 0.4), ideal(0.3, 5.0)),
    "no integral action": (first_order(2.0, 10.0, 3.0), ideal(1.0)),
    "no integral action and the wrong way round": (first_order(-2.0, 10.0, 0.0), ideal(1.0)),
}


def points(
    plant: PlantModel, low: float = 1e-3, high: float = 1e2, count: int = 250, noise: float = 0.0
) -> FrequencyResponse:
    told = rational(plant)
    omega = np.geomspace(low, high, count)
    s = 1j * omega[:, None]
    response = (
        told.gain * np.prod(s - np.array(told.zeros_rad_s), 1) / np.prod(s - np.array(told.poles_rad_s), 1)
    )
    random = np.random.default_rng(7)
    response *= 1.0 + noise * (random.normal(size=count) + 1j * random.normal(size=count))
    return FrequencyResponse(
        kind="frequency_response",
        frequencies_rad_s=tuple(omega.tolist()),
        response=tuple((value.real, value.imag) for value in response.tolist()),
        unstable_poles=sum(pole.real > 0 for pole in told.poles_rad_s),
        poles_at_origin=sum(pole == 0 for pole in told.poles_rad_s),
        dead_time_s=plant.dead_time_s,
    )


def reason(recomputation: Recomputation) -> str:
    assert recomputation.verdict == "undecided"
    return recomputation.continuous.stability.reason or ""


@pytest.mark.parametrize("noise", [0.0, 0.003, 0.02])
@pytest.mark.parametrize("name", LOOPS)
def test_the_points_give_the_verdict_and_the_margins_of_the_plant(name: str, noise: float) -> None:
    plant, controller = LOOPS[name]
    told, measured = recompute(plant, controller), recompute(points(plant, noise=noise), controller)
    assert measured.verdict == told.verdict
    stability = measured.continuous.stability
    assert [route.unstable_roots for route in stability.routes] == [
        told.continuous.stability.unstable_roots
    ] * 3
    if told.continuous.margins is None:
        return
    assert measured.continuous.margins is not None
    # noise in the points comes back in the margins, near a resonance more of it
    names = ("gain_margin", "phase_margin_deg", "max_sensitivity") if noise == 0.0 else ("max_sensitivity",)
    for margin in names:
        expected, found = (getattr(each.continuous.margins, margin) for each in (told, measured))
        assert found == (
            expected if expected == "unbounded" else pytest.approx(expected, rel=1e-6 + 10.0 * noise)
        )


def test_no_step_is_computed_and_the_result_says_so() -> None:
    plant, controller = LOOPS["a lag"]
    continuous = recompute(points(plant), controller, with_curves=True).continuous
    assert continuous.setpoint_step is None
    assert continuous.load_step is None
    assert continuous.notes == ("responses_not_from_points",)


def test_the_first_method_says_that_the_others_use_the_same_points() -> None:
    plant, controller = LOOPS["a lag"]
    route = recompute(points(plant), controller).continuous.stability.routes[0]
    assert "a fit of these same points" in route.method


def test_points_that_end_where_the_loop_is_not_yet_small_leave_it_open() -> None:
    plant, controller = LOOPS["a lag"]
    assert "does not reach up" in reason(recompute(points(plant, high=0.15), controller))


def test_points_that_begin_where_the_loop_is_not_yet_large_leave_it_open() -> None:
    plant, controller = LOOPS["a lag"]
    assert "does not reach down" in reason(recompute(points(plant, low=0.05), controller))


def test_points_too_far_apart_leave_it_open() -> None:
    plant, controller = LOOPS["a light resonance"]
    assert "turns by more than 90°" in reason(recompute(points(plant, count=12), controller))


def test_an_unfiltered_derivative_that_grows_beyond_the_points_leaves_it_open() -> None:
    lag = first_order(2.0, 10.0)
    assert reason(recompute(points(lag), ideal(1.0, 10.0, 30.0))) != ""


def test_noise_as_large_as_the_distance_to_minus_one_leaves_it_open() -> None:
    plant, _ = LOOPS["a lag"]
    critical = recompute(plant, ideal(1.0, 10.0)).continuous.margins
    assert critical is not None
    assert isinstance(critical.gain_margin, float)
    near = ideal(0.995 * critical.gain_margin, 10.0)
    assert recompute(plant, near).verdict == "stable"
    assert recompute(points(plant, noise=0.02), near).verdict != "stable"


def test_points_that_no_plant_with_the_stated_poles_has_are_refused_by_name() -> None:
    plant, controller = LOOPS["an unstable lag"]
    with pytest.raises(FieldError) as refused:
        recompute(replace(points(plant), unstable_poles=0), controller)
    assert refused.value.path == ("plant_model", "response")


def test_unstable_poles_that_the_points_do_not_show_are_never_called_stable() -> None:
    plant, controller = LOOPS["a lag"]
    for unstable_poles in (1, 2, 3):
        overstated = replace(points(plant), unstable_poles=unstable_poles)
        try:
            assert recompute(overstated, controller).verdict != "stable"
        except FieldError as error:
            refused = error.path
            assert refused == ("plant_model", "response")


def test_engineering_units_need_and_use_the_ranges() -> None:
    plant, controller = LOOPS["a lag"]
    ranges = Ranges(pv=Range(low=0.0, high=50.0), output=Range(low=0.0, high=10.0))
    entered = replace(points(plant), gain_basis="engineering_units")
    told = recompute(
        replace(plant, gain_basis="engineering_units"), controller, ranges=ranges
    ).continuous.margins
    measured = recompute(entered, controller, ranges=ranges).continuous.margins
    assert told is not None
    assert measured is not None
    assert measured.max_sensitivity == pytest.approx(told.max_sensitivity, rel=1e-6)


def test_at_its_scans_such_a_loop_is_undecided() -> None:
    plant, controller = LOOPS["a lag"]
    scanned = recompute(points(plant), replace(controller, scan=Scan(interval_s=0.5)))
    assert scanned.continuous.stability.verdict == "stable"
    assert scanned.verdict == "undecided"
