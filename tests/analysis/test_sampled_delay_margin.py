"""The delay margin of scanned loops whose plant is fast against the scan: the first delay that loses the
loop.

How much of a scan the dead time takes matters much to such a plant, so that a root may leave the circle, come
back and leave again. The loops are made up; roots are counted delay by delay.
"""

from __future__ import annotations

import cmath
import math
import os
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from service.analysis import sampled_delay
from service.analysis.codes import DELAY_MARGIN
from service.analysis.controller import Scan
from service.analysis.frequency import AxisResponse
from service.analysis.loop import form_loop
from service.analysis.recomputation import recompute
from service.analysis.sampled_loop import form_sampled_loop
from service.analysis.sampled_states import sampled_states
from service.analysis.scan import Scanned
from service.analysis.unit_circle import Divided, OnCircle, at_angle
from tests.analysis.entered import factors, first_order, ideal, integrating
from tests.analysis.sampled_truth import made_up

STEPS_A_SCAN = 43

RESONANT_LOOPS = int(os.environ.get("RESONANT_LOOPS", "0"))
"""So many resonant loops that nobody has chosen are tried in place of the few."""

NARROW = (11, 14, 283, 422, 437, 463, 521)
"""Loops whose resonance passes between the points of a grid that does not know of it."""


def unstable_roots(plant: Any, controller: Any, extra_s: float) -> int:
    """Eigenvalues outside the circle of the closed loop's matrix; the margin is found from L alone."""
    parts = form_loop(replace(plant, dead_time_s=plant.dead_time_s + extra_s), controller, None)
    scanned = Scanned.of(parts, controller.scan)
    matrix, _, _ = sampled_states(scanned, scanned.sample(), with_spared_noise=False).closed()
    return int(np.count_nonzero(np.abs(np.linalg.eigvals(matrix)) > 1.0))


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize(("extra", "angle"), [(0.0, 0.3), (0.37, 1.1), (2.62, math.pi)])
def test_at_one_angle_the_loop_is_the_same_and_its_slopes_are_its_own(
    seed: int, extra: float, angle: float
) -> None:
    plant, controller = made_up(seed)
    sampled = form_sampled_loop(Scanned.of(form_loop(plant, controller, None), controller.scan))
    interval = sampled.scanned.interval

    def value(at: float, scans: float) -> complex:
        plants = [sampled.scanned.sample(scans * interval)]
        return complex(OnCircle(sampled, np.array([at])).values(plants)[0, 0])

    told = at_angle(sampled, sampled.scanned.sample(extra * interval), angle)
    assert -cmath.exp(told.log_of_negative) == pytest.approx(value(angle, extra), rel=1e-9)
    if abs(value(angle, extra)) < 1e-9:
        # the trapezoidal rule has a zero at z = -1
        assert (controller.scan.method, angle) == ("trapezoidal", math.pi)
        return
    step = 1e-5
    by_angle = cmath.log(value(angle + step, extra) / value(angle - step, extra)) / (2 * step)
    by_scans = cmath.log(value(angle, extra + step) / value(angle, extra)) / step
    assert told.by_angle == pytest.approx(by_angle, rel=1e-4, abs=1e-4)
    assert told.by_scans == pytest.approx(by_scans, rel=1e-3, abs=1e-3)


def delay_margin_s(plant: Any, controller: Any) -> float:
    sampled = recompute(plant, controller).sampled
    assert sampled is not None
    assert sampled.margins is not None
    margin = sampled.margins.delay_margin_s
    assert isinstance(margin, float)
    return margin


@pytest.mark.parametrize("seed", [22, 26, 75, 83, 100119, 100142, 100236, 100237, 100764, 101261])
def test_no_root_is_outside_before_the_margin_and_one_is_behind_it(seed: int) -> None:
    plant, controller = made_up(seed)
    assert isinstance(controller.scan, Scan)
    margin, interval = delay_margin_s(plant, controller), controller.scan.interval_s
    # the last scans before it, every part of them
    start = max(0.0, margin - 6.0 * interval)
    for extra_s in np.arange(start + interval / STEPS_A_SCAN, margin * (1.0 - 1e-6), interval / STEPS_A_SCAN):
        assert unstable_roots(plant, controller, float(extra_s)) == 0
    assert unstable_roots(plant, controller, margin * (1.0 + 1e-6)) > 0


def resonant(seed: int) -> tuple[Any, Any]:
    """A lag with a light resonance beside zeros nearly as light, scanned every second."""
    rng = np.random.default_rng(seed)
    swing_rad_s, damping = 10 ** rng.uniform(-0.5, 0.9), 10 ** rng.uniform(-5.0, -2.0)
    lag_s, apart = 10 ** rng.uniform(-1.0, 1.0), rng.choice([-1.0, 1.0]) * 10 ** rng.uniform(-5.0, -1.0)
    pole, zero = swing_rad_s * complex(-damping, 1.0), swing_rad_s * complex(-2.0 * damping, 1.0 + apart)
    plant = factors(
        10 ** rng.uniform(-0.5, 0.5) / lag_s,
        [(zero.real, zero.imag), (zero.real, -zero.imag)],
        [-1.0 / lag_s, (pole.real, pole.imag), (pole.real, -pole.imag)],
        rng.uniform(0.0, 2.0),
    )
    return plant, ideal(rng.uniform(0.2, 1.2), lag_s * rng.uniform(0.7, 3.0), scan=Scan(interval_s=1.0))


def no_root_is_outside_before(plant: Any, controller: Any, margin: float) -> None:
    before = [
        *np.linspace(0.0, margin * (1.0 - 1e-6), min(400, 100 + int(80 * margin))),
        *margin * (1.0 - np.geomspace(1e-5, 0.1, 30)),
    ]
    assert [extra_s for extra_s in before if unstable_roots(plant, controller, float(extra_s))] == []
    assert unstable_roots(plant, controller, margin * (1.0 + 1e-4)) > 0


@pytest.mark.parametrize("seed", range(1000, 1000 + RESONANT_LOOPS) if RESONANT_LOOPS else NARROW)
def test_a_resonance_narrower_than_any_even_grid_is_seen(seed: int) -> None:
    plant, controller = resonant(seed)
    sampled = recompute(plant, controller).sampled
    assert sampled is not None
    if RESONANT_LOOPS and (sampled.margins is None or sampled.margins.delay_margin_s is None):
        pytest.skip("no delay margin is told")
    no_root_is_outside_before(plant, controller, delay_margin_s(plant, controller))


def test_a_resonance_beyond_the_nyquist_frequency_that_looks_like_a_slow_one_is_seen() -> None:
    # 6.32 rad/s scanned every second is 6.32 - 2π
    plant = factors(
        0.887, [(-4.3e-4, 5.947), (-4.3e-4, -5.947)], [-1 / 1.65, (-2.15e-4, 6.32), (-2.15e-4, -6.32)], 0.267
    )
    controller = ideal(0.698, 3.03, scan=Scan(interval_s=1.0))
    margin = delay_margin_s(plant, controller)
    assert margin < controller.scan.interval_s / 4
    no_root_is_outside_before(plant, controller, margin)


def test_a_mode_that_swings_many_times_within_a_scan_leaves_the_delay_margin_untold() -> None:
    plant = factors(0.01 * 40.0**2, [], [-0.1, (-0.01, 40.0), (-0.01, -40.0)], 1.5)
    sampled = recompute(plant, ideal(1.0, 20.0, scan=Scan(interval_s=1.0))).sampled
    assert sampled is not None
    assert sampled.stability.verdict == "stable"
    assert sampled.margins is not None
    assert sampled.margins.delay_margin_s is None
    assert DELAY_MARGIN in sampled.notes


@pytest.mark.parametrize("seed", [100181])
def test_a_loop_that_is_lost_for_a_moment_and_regained_has_the_margin_of_that_moment(seed: int) -> None:
    plant, controller = made_up(seed)
    assert isinstance(controller.scan, Scan)
    margin, interval = delay_margin_s(plant, controller), controller.scan.interval_s
    assert unstable_roots(plant, controller, margin + 0.02 * interval) > 0
    assert unstable_roots(plant, controller, margin + 0.3 * interval) == 0


def test_no_margin_is_told_behind_a_delay_at_which_a_root_comes_back() -> None:
    # outside for 0.003 s of more dead time, between two points of every grid
    plant, controller = made_up(100_764)
    margin = delay_margin_s(plant, controller)
    assert margin < 17.6
    counts = [unstable_roots(plant, controller, margin * (1.0 + more)) for more in (-1e-5, 5e-5, 1e-3)]
    assert counts == [0, 2, 0]


def test_a_plant_slow_against_its_scan_has_one_crossing() -> None:
    plant, controller = integrating(0.1, 2.0, 0.5), ideal(1.0, 20.0, scan=Scan(interval_s=0.1))
    margin = delay_margin_s(plant, controller)
    assert unstable_roots(plant, controller, margin * (1.0 - 1e-7)) == 0
    assert unstable_roots(plant, controller, margin * (1.0 + 1e-7)) == 2


def test_a_loop_whose_gain_never_reaches_one_bears_any_delay() -> None:
    sampled = recompute(first_order(0.5, 10.0), ideal(1.0, scan=Scan(interval_s=1.0))).sampled
    assert sampled is not None
    assert sampled.margins is not None
    assert sampled.margins.delay_margin_s == "unbounded"


def leaves_first(plant: Any, controller: Any, angle: float, extra_s: float) -> bool:
    """Whether the root that lies upon the circle nearest to these places is the first to leave it."""
    sampled = form_sampled_loop(Scanned.of(form_loop(plant, controller, None), controller.scan))
    found = sampled_delay._newton(sampled, angle, extra_s / controller.scan.interval_s)
    assert found is not None
    assert found[1] * controller.scan.interval_s == pytest.approx(extra_s, rel=0.02)
    touch = sampled_delay._Touch(found[1] * sampled.scanned.interval, found[0])
    reach = Divided.of(sampled, AxisResponse.of(sampled.loop)).reach()
    # its eigenvalues are looked at, however many scans there are
    assert sampled_delay._outer_roots(sampled, sampled.scanned.sample(touch.delay), reach) is not None
    return sampled_delay._first_to_leave(sampled, reach, touch)


@pytest.mark.parametrize(("turns", "first"), [(0, True), (1, False)])
def test_a_root_that_leaves_while_another_is_outside_is_not_the_first(turns: int, first: bool) -> None:
    plant, controller = first_order(1.0, 10.0, 4.0), ideal(1.5, 10.0, scan=Scan(interval_s=1.0))
    sampled = recompute(plant, controller).sampled
    assert sampled is not None
    rad_s = sampled.crossovers.gain_crossovers[0].rad_s
    extra_s = delay_margin_s(plant, controller) + turns * 2.0 * math.pi / rad_s
    assert unstable_roots(plant, controller, extra_s * 0.99) == (0 if first else 2)
    assert leaves_first(plant, controller, rad_s, extra_s) is first


@pytest.mark.parametrize(("extra_s", "leaves"), [(2.756, True), (2.78, False)])
def test_a_root_that_comes_back_is_not_one_that_leaves(extra_s: float, leaves: bool) -> None:
    # outside for 0.02 s of more dead time, less than a twentieth of a scan
    plant, controller = made_up(100_743)
    assert leaves_first(plant, controller, 0.3285, extra_s) is leaves
