"""Loops as they are executed, chosen to be hard, against the slow references `sampled_*`."""

from __future__ import annotations

import math
from typing import Any

import pytest

from service.analysis.controller import Controller, Scan, SetpointWeight
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Stability
from tests.analysis.entered import (
    factors,
    first_order,
    ideal,
    integrating,
    lags,
    parallel,
    ratio,
    resonant,
    series,
    two_zeros,
)
from tests.analysis.sampled_truth import Comparison, compared
from tests.references.sampled_told import roots_outside

BACKWARD, TRAPEZOIDAL = "backward_difference", "trapezoidal"

every_method = pytest.mark.parametrize("method", [BACKWARD, TRAPEZOIDAL])


def scan(interval_s: float, method: Any = BACKWARD, output_delay_s: float = 0.0) -> Scan:
    return Scan(interval_s=interval_s, method=method, output_delay_s=output_delay_s)


FORMS: dict[str, Any] = {
    "ideal": lambda **more: ideal(1.8, 6.0, 0.9, 0.2, **more),
    "series": lambda **more: series(1.5, 5.0, 0.8, 0.15, **more),
    "parallel": lambda **more: parallel(1.6, 0.3, 1.1, 0.25, **more),
    "two real zeros": lambda **more: two_zeros(1.2, (-0.3, -0.9), 0.2, **more),
    "two complex zeros": lambda **more: two_zeros(1.2, ((-0.5, 0.2), (-0.5, -0.2)), 0.2, **more),
    "one zero": lambda **more: two_zeros(1.2, (-0.25,), **more),
    "integral only": lambda **more: ideal(None, 9.0, **more),
    "proportional only": lambda **more: ideal(2.2, **more),
}


@every_method
@pytest.mark.parametrize("form", FORMS)
def test_every_form_by_both_methods(form: str, method: str) -> None:
    controller = FORMS[form](
        scan=scan(0.4, method, 0.1),
        measurement_filter_s=0.3,
        setpoint_weight=SetpointWeight(proportional=0.6, derivative=0.4),
    )
    assert compared(lags(0.9, [5.0, 1.0], dead_time_s=0.73), controller) == []


@pytest.mark.parametrize("form", ["ideal", "series", "parallel", "two real zeros"])
def test_a_derivative_without_a_filter_is_a_difference_of_two_scans(form: str) -> None:
    unfiltered: dict[str, Any] = {
        "ideal": lambda **more: ideal(1.8, 6.0, 0.9, **more),
        "series": lambda **more: series(1.5, 5.0, 0.8, **more),
        "parallel": lambda **more: parallel(1.6, 0.3, 1.1, **more),
        "two real zeros": lambda **more: two_zeros(1.2, (-0.3, -0.9), **more),
    }
    controller = unfiltered[form](
        scan=scan(0.5), setpoint_weight=SetpointWeight(proportional=1.0, derivative=1.0)
    )
    assert compared(lags(0.6, [5.0, 1.0], dead_time_s=0.6), controller) == []


@pytest.mark.parametrize("scans", [0.0, 1.0, 2.0, 7.0, 0.3, 1.5, 4.999999, 3.0000001])
def test_dead_time_of_any_number_of_scans(scans: float) -> None:
    controller = ideal(0.7, 6.0, scan=scan(1.0))
    assert compared(first_order(1.0, 6.0, scans), controller, search=True) == []


HARD: dict[str, tuple[PlantModel, Controller]] = {
    "a scan long against the lag": (first_order(1.0, 0.2, 0.3), ideal(0.2, 1.5, scan=scan(2.0))),
    "a scan very long against the lag": (first_order(1.0, 0.01, 0.7), ideal(0.3, 3.0, scan=scan(1.0))),
    "a light resonance beyond the Nyquist frequency": (
        resonant(1.0, 8.0, 0.02, 1.3),
        ideal(0.05, 2.0, scan=scan(1.0)),
    ),
    "a light resonance at the Nyquist frequency": (
        resonant(1.0, math.pi, 0.05, 0.4),
        ideal(0.02, 1.0, scan=scan(1.0)),
    ),
    "a light resonance under long dead time": (
        resonant(1.0, 1.0, 0.01, 12.3),
        ideal(0.01, 1.0, scan=scan(0.4)),
    ),
    "integrating, with a lag": (integrating(0.2, 1.5, 0.9), ideal(0.9, 20.0, 0.8, 0.1, scan=scan(0.6))),
    "integrating, proportional only": (integrating(0.2, 0.0, 0.9), ideal(1.4, scan=scan(0.6, TRAPEZOIDAL))),
    "twice integrating": (ratio([1.0], [1.0, 0.0, 0.0], 0.1), series(0.05, 20.0, 8.0, 0.8, scan=scan(0.2))),
    "an unstable lag": (first_order(-1.0, -5.0, 0.4), ideal(3.0, 20.0, scan=scan(0.3))),
    "an unstable lag, gain reduction": (first_order(-1.0, -5.0, 0.4), ideal(1.2, scan=scan(0.3))),
    "passes a step at once": (ratio([1.0, 2.0], [3.0, 2.0], 0.3), ideal(0.8, 2.0, scan=scan(0.25))),
    "passes a step at once, no dead time": (ratio([1.0, 2.0], [3.0, 2.0]), ideal(1.4, 2.0, scan=scan(0.25))),
    "passes a step at once, whole scans": (
        ratio([1.0, 2.0], [3.0, 2.0], 1.0),
        ideal(0.8, 2.0, scan=scan(0.5)),
    ),
    "nothing but a gain": (factors(0.8, [], []), ideal(0.2, 1.0, scan=scan(0.5))),
    "nothing but a gain and dead time": (factors(0.8, [], [], 1.2), ideal(0.2, 2.0, scan=scan(0.5))),
    "inverse response": (lags(1.0, [4.0, 3.0], [-1.5], 0.5), ideal(0.9, 6.0, scan=scan(0.5))),
    "overshoots by itself": (lags(1.0, [4.0, 1.0], [9.0], 0.5), ideal(0.3, 4.0, scan=scan(0.5))),
    "300 scans of dead time": (first_order(1.0, 5.0, 30.0), ideal(0.3, 8.0, scan=scan(0.1))),
    "equal lags": (lags(1.0, [2.0] * 5, (), 0.35), ideal(0.8, 7.0, 1.5, 0.3, scan=scan(0.5))),
    "a crossing at the Nyquist frequency": (first_order(1.0, 1.0), ideal(2.0, scan=scan(1.0))),
    "a ringing derivative": (
        lags(1.0, [5.0, 1.0], (), 0.2),
        ideal(1.0, 5.0, 1.0, 0.05, scan=scan(0.5, TRAPEZOIDAL)),
    ),
    "a measurement filter shorter than a scan": (
        first_order(1.0, 5.0, 1.0),
        ideal(1.0, 5.0, scan=scan(0.5, TRAPEZOIDAL), measurement_filter_s=0.05),
    ),
    "a lasting offset": (lags(1.0, [5.0, 1.0], (), 0.7), ideal(3.0, scan=scan(0.4))),
    "output delay only": (first_order(1.0, 5.0), ideal(2.0, 5.0, scan=scan(0.5, BACKWARD, 0.8))),
    "direct-acting": (first_order(-1.0, 5.0, 1.0), ideal(1.5, 5.0, action="direct", scan=scan(0.5))),
    "the wrong action": (first_order(-1.0, 5.0, 1.0), ideal(1.5, 5.0, scan=scan(0.5))),
    "stable at its time, unstable at its scan": (first_order(1.0, 5.0), ideal(40.0, 5.0, scan=scan(0.5))),
    "in milliseconds": (first_order(1.0, 5e-3, 1.3e-3), ideal(2.0, 5e-3, scan=scan(5e-4))),
    "in days": (first_order(1.0, 5e5, 1.3e5), ideal(2.0, 5e5, scan=scan(5e4))),
    "a scan short against everything": (first_order(1.0, 20.0, 2.05), ideal(3.0, 20.0, scan=scan(0.1))),
}


@pytest.mark.parametrize("name", HARD)
def test_a_hard_loop(name: str) -> None:
    assert compared(*HARD[name]) == []


SEARCHED = [
    "a scan long against the lag",
    "integrating, proportional only",
    "an unstable lag",
    "passes a step at once",
    "passes a step at once, whole scans",
    "inverse response",
    "output delay only",
]


@pytest.mark.parametrize("name", SEARCHED)
def test_the_delay_margin_by_lengthening_the_dead_time_step_by_step(name: str) -> None:
    comparison = Comparison(*HARD[name])
    comparison.delay_margin_by_search()
    assert comparison.differences == []


def test_a_hidden_lag_counts_where_it_lies() -> None:
    # as executed nothing is cancelled: the controller's zero lies elsewhere than the plant's pole
    assert compared(first_order(2.0, 10.0, 1.0), ideal(1.0, 10.0, scan=scan(1.0))) == []
    # a measurement that does not see an unstable mode
    hidden = recompute(factors(0.3, [0.2], [0.2, -1.0]), ideal(1.0, 10.0, scan=scan(0.5))).sampled
    assert hidden is not None
    assert hidden.stability.verdict == "unstable"
    assert hidden.stability.spectral_radius == pytest.approx(math.exp(0.1), rel=1e-9)


@pytest.mark.parametrize("interval_s", [0.3, 0.1])
@pytest.mark.parametrize("distance", [1e-3, 1e-6])
def test_loops_next_to_their_own_limit_are_decided_and_rightly(interval_s: float, distance: float) -> None:
    plant, controller = lags(1.0, [5.0, 1.0], (), 0.77), ideal(1.5, 6.0, scan=scan(interval_s))
    found = recompute(plant, controller).sampled
    assert found is not None
    assert found.margins is not None
    limit = found.margins.gain_margin
    assert isinstance(limit, float)
    for side, verdict in ((-distance, "stable"), (distance, "unstable")):
        scaled = lags(limit * (1.0 + side), [5.0, 1.0], (), 0.77)
        comparison = Comparison(scaled, controller)
        assert comparison.analysis.stability.verdict == verdict
        assert (roots_outside(comparison.loop.characteristic()) > 0) == (verdict == "unstable")


@pytest.mark.parametrize("side", [-1e-9, 1e-9])
def test_as_near_as_a_part_in_a_thousand_million_the_verdict_is_never_wrong(side: float) -> None:
    plant, controller = lags(1.0, [5.0, 1.0], (), 0.77), ideal(1.5, 6.0, scan=scan(0.3))
    found = recompute(plant, controller).sampled
    assert found is not None
    assert found.margins is not None
    limit = found.margins.gain_margin
    assert isinstance(limit, float)
    near = recompute(lags(limit * (1.0 + side), [5.0, 1.0], (), 0.77), controller).sampled
    assert near is not None
    assert near.stability.verdict in ("undecided", "unstable" if side > 0 else "stable")


@pytest.mark.parametrize("interval_s", [30.0, 60.0, 400.0, 1e5])
def test_an_unstable_plant_that_a_scan_leaves_far_behind_is_never_called_stable(interval_s: float) -> None:
    # its pole at exp(h) is beyond float64, or has lost its digits
    found = recompute(first_order(-1.0, -1.0), ideal(2.0, scan=scan(interval_s))).sampled
    assert found is not None
    assert found.stability.verdict != "stable"
    assert_numbers(found.stability)


@pytest.mark.parametrize("gain", [1e16, 1e200])
def test_a_gain_beyond_all_reason_gives_numbers_or_nothing(gain: float) -> None:
    found = recompute(first_order(1.0, 5.0, 0.7), ideal(gain, 5.0, scan=scan(0.5))).sampled
    assert found is not None
    assert found.stability.verdict == "unstable"
    assert_numbers(found.stability)


def test_a_plant_with_an_unstable_pole_beside_its_zero_at_a_long_scan_gives_numbers_or_nothing() -> None:
    plant = factors(0.76, [0.0736], [0.0690, -0.8093])
    found = recompute(plant, ideal(1.0, scan=scan(805.0, BACKWARD, 10.0), measurement_filter_s=1.0)).sampled
    assert found is not None
    assert found.stability.verdict != "stable"
    assert_numbers(found.stability)


def assert_numbers(stability: Stability) -> None:
    assert stability.spectral_radius is None or math.isfinite(float(stability.spectral_radius))
    for told in stability.dominant_roots:
        assert math.isfinite(abs(complex(*told.root) if isinstance(told.root, tuple) else told.root))
