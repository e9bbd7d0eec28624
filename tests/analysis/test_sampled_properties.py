"""What holds for every loop as it is executed, tried on loops that are made up.

The normal run tries the same loops every time; PROPERTY_EXAMPLES=2000 in the environment tries so many new
ones.
"""

from __future__ import annotations

import math
import os
from dataclasses import fields, replace
from typing import Any

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from service.analysis.controller import (
    Controller,
    IdealController,
    ParallelController,
    Scan,
    SeriesController,
    TwoZerosController,
)
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis, Margins
from service.analysis.terms import controller_terms
from tests.analysis.entered import first_order, ideal, lags, series
from tests.analysis.sampled_truth import made_up

EXAMPLES = os.environ.get("PROPERTY_EXAMPLES")
tried = settings(max_examples=int(EXAMPLES or 15), derandomize=EXAMPLES is None)

loops = st.integers(200_000, 2_000_000).map(made_up)

TIMES = ("delay_margin_s",)
FREQUENCIES = ("max_sensitivity_rad_s",)
FREE_OF_TIME = (
    "gain_margin",
    "gain_reduction_margin",
    "phase_margin_deg",
    "max_sensitivity",
    "max_complementary_sensitivity",
    "disk_margin",
)
NEAR_THE_CIRCLE = 1e-6
"""A loop that is nearer to its limit than this may be undecided once it is told otherwise."""


def at_scans(plant: Any, controller: Controller) -> Analysis:
    found = recompute(plant, controller).sampled
    assert found is not None
    return found


def decided(loop: tuple[Any, Controller]) -> Analysis:
    found = at_scans(*loop)
    radius = found.stability.spectral_radius
    assume(isinstance(radius, float) and abs(radius - 1.0) > NEAR_THE_CIRCLE)
    return found


def assert_same_margins(one: Margins | None, other: Margins | None, unit: float = 1.0) -> None:
    assert (one is None) == (other is None)
    if one is None or other is None:
        return
    powers = dict.fromkeys(FREE_OF_TIME, 0) | dict.fromkeys(TIMES, 1) | dict.fromkeys(FREQUENCIES, -1)
    for name, power in powers.items():
        first, second = getattr(one, name), getattr(other, name)
        if not isinstance(first, float) or not isinstance(second, float):
            assert first == second, name
        else:
            # where a peak is flat its place is known to the square root of the rounding only
            near = 1e-5 if name in FREQUENCIES else 1e-8
            assert second == pytest.approx(first * unit**power, rel=near), name


def divided(controller: Controller, k: float) -> Controller:
    """Every term of the controller divided; ideal and parallel terms one by one."""

    def less(term: Any) -> Any:
        return term and replace(term, value=term.value / k)

    match controller:
        case IdealController() | SeriesController():
            assume(controller.proportional is not None)
            return replace(controller, proportional=less(controller.proportional))
        case ParallelController():
            return replace(
                controller,
                proportional=less(controller.proportional),
                integral=less(controller.integral),
                derivative=less(controller.derivative),
            )
        case TwoZerosController():
            return replace(controller, gain=controller.gain / k)


@tried
@given(loop=loops, k=st.floats(-3.0, 3.0).map(lambda power: 10.0**power))
def test_a_plant_times_k_under_a_controller_divided_by_k_is_the_same_loop(loop: Any, k: float) -> None:
    plant, controller = loop
    one = decided(loop)
    other = at_scans(replace(plant, gain=plant.gain * k), divided(controller, k))
    assert one.stability.verdict == other.stability.verdict
    assert other.stability.spectral_radius == pytest.approx(one.stability.spectral_radius, rel=1e-9)
    assert_same_margins(one.margins, other.margins)
    if one.noise is not None and other.noise is not None:
        assert isinstance(one.noise.output_std_per_noise_std, float)
        expected = one.noise.output_std_per_noise_std / k
        assert other.noise.output_std_per_noise_std == pytest.approx(expected, rel=1e-7)
        assert other.noise.derivative_share == pytest.approx(one.noise.derivative_share, rel=1e-7, abs=1e-9)


def in_time(loop: tuple[Any, Controller], unit: float) -> tuple[Any, Controller]:
    """The loop with every time multiplied; forms whose terms are times."""
    plant, controller = loop
    assume(isinstance(controller, IdealController | SeriesController))
    assert isinstance(controller, IdealController | SeriesController)
    assert isinstance(controller.scan, Scan)

    def scaled(root: Any) -> Any:
        return tuple(part / unit for part in root) if isinstance(root, tuple) else root / unit

    def longer(term: Any) -> Any:
        return term and replace(term, value=term.value * unit)

    told = replace(
        plant,
        zeros_rad_s=tuple(map(scaled, plant.zeros_rad_s)),
        poles_rad_s=tuple(map(scaled, plant.poles_rad_s)),
        gain=plant.gain / unit ** (len(plant.poles_rad_s) - len(plant.zeros_rad_s)),
        dead_time_s=plant.dead_time_s * unit,
    )
    scan = controller.scan
    return told, replace(
        controller,
        integral=longer(controller.integral),
        derivative=longer(controller.derivative),
        derivative_filter=longer(controller.derivative_filter),
        measurement_filter_s=controller.measurement_filter_s * unit,  # type: ignore[operator]
        scan=replace(scan, interval_s=scan.interval_s * unit, output_delay_s=scan.output_delay_s * unit),
    )


@tried
@given(loop=loops, unit=st.sampled_from([1e-3, 1.0 / 60.0, 3600.0, 86400.0]))
def test_the_same_loop_told_in_another_unit_of_time(loop: Any, unit: float) -> None:
    told = in_time(loop, unit)
    one, other = decided(loop), at_scans(*told)
    assert one.stability.verdict == other.stability.verdict
    assert other.stability.spectral_radius == pytest.approx(one.stability.spectral_radius, rel=1e-9)
    assert_same_margins(one.margins, other.margins, unit)
    if one.noise is not None and other.noise is not None:
        for field in fields(one.noise):
            first, second = getattr(one.noise, field.name), getattr(other.noise, field.name)
            assert second == (first if isinstance(first, str) else pytest.approx(first, rel=1e-7, abs=1e-9))


@tried
@given(loop=loops)
def test_a_load_leaves_an_integrated_error_of_1_over_ki(loop: Any) -> None:
    found = decided(loop)
    ki = controller_terms(loop[1]).feedback.ki_per_s
    assume(found.load_step is not None and ki > 0 and not found.notes)
    assert found.load_step is not None
    assert isinstance(found.load_step.integrated_error, float)
    assert found.load_step.integrated_error * ki == pytest.approx(-1.0, rel=1e-7)


@tried
@given(loop=loops)
def test_the_largest_sensitivity_bounds_the_margins(loop: Any) -> None:
    margins = decided(loop).margins
    assume(margins is not None)
    assert margins is not None
    most, least = margins.max_sensitivity, 1.0 - 1e-9
    assert isinstance(most, float)
    if isinstance(margins.gain_margin, float) and most > 1:
        assert margins.gain_margin >= most / (most - 1.0) * least
    if isinstance(margins.gain_reduction_margin, float):
        assert margins.gain_reduction_margin * least <= most / (most + 1.0)
    if isinstance(margins.phase_margin_deg, float):
        assert margins.phase_margin_deg >= math.degrees(2.0 * math.asin(min(1.0, 0.5 / most))) * least
    assert isinstance(margins.disk_margin, float)
    # abs(1 − L) ≤ 2 + abs(1 + L)
    assert margins.disk_margin >= 2.0 / (1.0 + 2.0 * most) * least


TENDING: dict[str, tuple[Any, Any]] = {
    "a lag": (first_order(1.0, 5.0, 1.0), ideal(3.0, 5.0)),
    "three lags": (lags(1.5, [5.0, 2.0, 1.0], (), 0.5), ideal(0.9, 6.0, 1.2, 0.3)),
    "inverse response, series": (lags(1.0, [4.0, 3.0], [-1.0], 0.5), series(0.8, 5.0, 1.0, 0.2)),
    "unstable": (first_order(1.0, 5.0, 1.0), ideal(12.0, 5.0)),
}

INTERVALS_S = (0.02, 0.01)

SMOOTH = {
    f"Margins.{name}" for name in ("gain_margin", "phase_margin_deg", "max_sensitivity", "delay_margin_s")
}
SMOOTH |= {"SetpointStep.iae", "SetpointStep.ise", "SetpointStep.itae", "LoadStep.iae"}


def scanned(controller: Any, interval_s: float, method: Any) -> Controller:
    with_scan: Controller = replace(controller, scan=Scan(interval_s=interval_s, method=method))
    return with_scan


def told(analysis: Analysis) -> dict[str, float]:
    """Figures that are numbers."""
    parts = (analysis.margins, analysis.setpoint_step, analysis.load_step)
    figures = {
        f"{type(part).__name__}.{field.name}": getattr(part, field.name)
        for part in parts
        if part is not None
        for field in fields(part)
    }
    return {name: value for name, value in figures.items() if type(value) is float and value != 0}


@pytest.mark.parametrize("method", ["backward_difference", "trapezoidal"])
@pytest.mark.parametrize("name", TENDING)
def test_the_sampled_loop_tends_to_the_continuous_one_in_proportion_to_the_scan(
    name: str, method: Any
) -> None:
    plant, controller = TENDING[name]
    limit = recompute(plant, controller).continuous
    near = [at_scans(plant, scanned(controller, interval_s, method)) for interval_s in INTERVALS_S]
    assert {found.stability.verdict for found in near} == {limit.stability.verdict}
    assert {found.stability.unstable_roots for found in near} == {limit.stability.unstable_roots}
    rates = []
    for found, interval_s in zip(near, INTERVALS_S, strict=True):
        assert isinstance(found.stability.spectral_radius, float)
        rates.append(-math.log(found.stability.spectral_radius) / interval_s)
    assert isinstance(limit.stability.decay_rate_per_s, float)
    assert rates[1] == pytest.approx(limit.stability.decay_rate_per_s, rel=0.03)
    coarse, fine = (told(found) for found in near)
    for figure, value in told(limit).items():
        # per cent of overshoot are a share already
        size = 100.0 if "percent" in figure else abs(value)
        errors = [abs(found.get(figure, 0.0) - value) / size for found in (coarse, fine)]
        assert errors[1] < 0.03, figure
        # at least halved with the scan, but for what a turn or a passage moves by when it changes its scan
        assert errors[1] < 0.6 * errors[0] + (1e-9 if figure in SMOOTH else 1e-3), (figure, errors)


@pytest.mark.parametrize("name", ["a lag", "three lags", "inverse response, series"])
def test_half_a_scan_of_dead_time_is_what_the_trapezoidal_loop_has_more_to_the_second_order(
    name: str,
) -> None:
    # common practice: the hold acts like half a scan of dead time
    plant, controller = TENDING[name]
    errors = []
    for interval_s in (0.2, 0.1):
        found = at_scans(plant, scanned(controller, interval_s, "trapezoidal")).margins
        held = replace(plant, dead_time_s=plant.dead_time_s + interval_s / 2)
        like = recompute(held, controller).continuous.margins
        assert found is not None
        assert like is not None
        errors.append(
            [
                abs(getattr(found, name) / getattr(like, name) - 1.0)
                for name in ("gain_margin", "max_sensitivity")
            ]
        )
    for coarse, fine in zip(*errors, strict=True):
        assert fine < 2e-3
        assert coarse / fine > 3.3
