"""Loops in which controller and plant cancel a factor: it counts where it lies, and nothing else does."""

from __future__ import annotations

import math

import pytest

from service.analysis.recomputation import recompute
from tests.analysis.entered import factors, first_order, ideal, series


@pytest.mark.parametrize("dead_time_s", [0.0, 1.5])
def test_an_integral_time_equal_to_the_lag_leaves_the_lag_itself_as_a_root(dead_time_s: float) -> None:
    stability = recompute(first_order(2.0, 10.0, dead_time_s), ideal(1.0, 10.0)).continuous.stability
    assert stability.verdict == "stable"
    assert -0.1 in [root.root for root in stability.dominant_roots]
    assert stability.decay_rate_per_s == pytest.approx(0.1, rel=1e-12)


def test_what_is_left_of_a_cancelled_lag_is_a_loop_of_first_order() -> None:
    # L = 0.2/s: PV = 1 − e^(−0.2·t)
    step = recompute(first_order(2.0, 10.0), ideal(1.0, 10.0)).continuous.setpoint_step
    assert step is not None
    assert step.settling_time_s == pytest.approx(math.log(50.0) / 0.2, rel=1e-9)
    assert step.rise_time_s == pytest.approx(math.log(9.0) / 0.2, rel=1e-9)


def test_both_lags_may_be_cancelled() -> None:
    stability = recompute(factors(0.3, [], [-0.1, -0.5]), series(1.0, 10.0, 2.0)).continuous.stability
    assert stability.verdict == "stable"
    # k·Td over s is left of L
    roots = [root.root for root in stability.dominant_roots]
    assert roots == pytest.approx([-0.1, -0.5, -0.6], rel=1e-12)


def test_a_cancelled_factor_right_of_the_axis_is_unstable() -> None:
    stability = recompute(factors(0.3, [0.2], [0.2, -1.0]), ideal(1.0, 10.0)).continuous.stability
    assert stability.verdict == "unstable"
    assert stability.unstable_roots == 1
