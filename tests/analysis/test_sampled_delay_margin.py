"""The delay margin of scanned loops whose plant is fast against the scan: the first delay that loses the
loop.

How much of a scan the dead time takes matters much to such a plant, so that a root may leave the circle, come
back and leave again. The loops are made up; roots are counted delay by delay.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from service.analysis import sampled_delay
from service.analysis.controller import Scan
from service.analysis.frequency import AxisResponse
from service.analysis.loop import form_loop
from service.analysis.recomputation import recompute
from service.analysis.sampled_loop import form_sampled_loop
from service.analysis.sampled_states import sampled_states
from service.analysis.scan import Scanned
from service.analysis.unit_circle import Divided, OnCircle, at_angle
from tests.analysis.entered import first_order, ideal, integrating
from tests.analysis.sampled_truth import made_up

STEPS_A_SCAN = 43


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


@pytest.mark.parametrize("seed", [22, 26, 75, 83, 100119, 100142, 100236, 100237])
def test_no_root_is_outside_before_the_margin_and_one_is_behind_it(seed: int) -> None:
    plant, controller = made_up(seed)
    assert isinstance(controller.scan, Scan)
    margin, interval = delay_margin_s(plant, controller), controller.scan.interval_s
    # the last scans before it, every part of them
    start = max(0.0, margin - 6.0 * interval)
    for extra_s in np.arange(start + interval / STEPS_A_SCAN, margin * (1.0 - 1e-6), interval / STEPS_A_SCAN):
        assert unstable_roots(plant, controller, float(extra_s)) == 0
    assert unstable_roots(plant, controller, margin * (1.0 + 1e-6)) > 0


@pytest.mark.parametrize("seed", [100181])
def test_a_loop_that_is_lost_for_a_moment_and_regained_has_the_margin_of_that_moment(seed: int) -> None:
    plant, controller = made_up(seed)
    assert isinstance(controller.scan, Scan)
    margin, interval = delay_margin_s(plant, controller), controller.scan.interval_s
    assert unstable_roots(plant, controller, margin + 0.02 * interval) > 0
    assert unstable_roots(plant, controller, margin + 0.3 * interval) == 0


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
