"""Uncertain loops whose worst member is known in closed form, so that every bracket can be held to it.

Integrator with dead time under proportional control: the ultimate gain is π/(2·k·θ), the phase crossing lies
at π/(2·θ) and the gain crossover at k·Kc. D. Di Ruscio, Modeling, Identification and Control 31 (2010)
145-164.

Lag with dead time under proportional control: stable for −1/k < Kc < (T/(k·L))·√(α² + L²/T²), α the root of
tan α = −(T/L)·α in (π/2, π). G. J. Silva, A. Datta, S. P. Bhattacharyya, Automatica 37 (2001) 2025-2031,
theorem 1 (from memory).
"""

from __future__ import annotations

import math
from typing import Any

import pytest
from scipy.optimize import brentq

from service.analysis.recomputation import recompute
from service.analysis.results import WorstCase
from tests.analysis.entered import first_order, ideal, integrating
from tests.analysis.uncertain import uncertain


def worst_case(plant: Any, controller: Any) -> WorstCase:
    found = recompute(plant, controller).worst_case
    assert found is not None
    return found


@pytest.mark.parametrize("loop_gain", [0.1, 0.4, 0.8])
@pytest.mark.parametrize(
    ("high_gain", "high_time", "extra"), [(1.25, 1.4, 0.0), (1.0, 1.5, 0.1), (1.3, 1.0, 0.0)]
)
def test_an_integrator_with_dead_time_is_worst_at_the_highest_gain_and_dead_time(
    loop_gain: float, high_gain: float, high_time: float, extra: float
) -> None:
    gain_per_s, dead_time_s = 0.02, 7.0
    plant = uncertain(
        integrating(gain_per_s, 0.0, dead_time_s),
        gain=(0.7, high_gain),
        time_constants=(0.5, 2.0),
        dead_time=(0.6, high_time),
        extra_s=extra * dead_time_s,
    )
    kc = loop_gain / (gain_per_s * dead_time_s)
    worst = worst_case(plant, ideal(kc))
    longest = dead_time_s * (high_time + extra)
    product = high_gain * gain_per_s * kc * longest
    assert product < 0.5 * math.pi
    assert worst.stable_for_all is True
    assert worst.gain_margin == pytest.approx(0.5 * math.pi / product, rel=1e-6)
    assert worst.phase_margin_deg == pytest.approx(90.0 - math.degrees(product), rel=1e-6)
    assert worst.delay_margin_s == pytest.approx((0.5 * math.pi / product - 1.0) * longest, rel=1e-6)
    corner = recompute(integrating(high_gain * gain_per_s, 0.0, longest), ideal(kc)).continuous.margins
    assert corner is not None
    assert worst.max_sensitivity is not None
    at_least, at_most = worst.max_sensitivity.at_least, worst.max_sensitivity.at_most
    assert at_least * (1.0 - 1e-9) <= corner.max_sensitivity <= at_most <= 1.01 * at_least


def test_an_integrator_with_dead_time_tolerates_errors_up_to_its_ultimate_gain() -> None:
    # 0.5·(1.25·1.4)^r = π/2
    plant = uncertain(integrating(0.5, 0.0, 1.0), gain=(0.8, 1.25), dead_time=(0.7, 1.4))
    scale = math.log(math.pi) / math.log(1.25 * 1.4)
    found = worst_case(plant, ideal(1.0)).tolerated_error_scale
    assert found is not None
    assert found.at_least <= scale <= found.at_most <= 1.01 * found.at_least


def ultimate_gain(gain: float, time_s: float, dead_time_s: float) -> float:
    ratio = time_s / dead_time_s
    alpha = brentq(lambda a: math.sin(a) + ratio * a * math.cos(a), 0.5 * math.pi, math.pi, xtol=1e-15)
    return float(ratio / gain * math.sqrt(alpha**2 + ratio**-2))


@pytest.mark.parametrize("dead_time_s", [0.2, 1.0, 6.0])
@pytest.mark.parametrize("short", [0.5, 1.0])
def test_a_lag_with_dead_time_is_stable_for_all_up_to_the_limit_of_its_worst_corner(
    dead_time_s: float, short: float
) -> None:
    limit = ultimate_gain(2.0, 5.0 * short, 1.4 * dead_time_s)
    for share, stable in ((0.9999, True), (1.0001, False)):
        plant = uncertain(
            first_order(2.0, 5.0, dead_time_s),
            gain=(0.8, 1.25),
            time_constants=(short, 1.5),
            dead_time=(0.7, 1.4),
        )
        worst = worst_case(plant, ideal(share * limit / 1.25))
        assert worst.stable_for_all is stable
        if stable:
            assert worst.gain_margin == pytest.approx(1.0 / share, rel=1e-6)


def test_a_proportional_gain_of_the_wrong_sign_is_limited_by_the_static_gain() -> None:
    # −1/k < Kc
    plant = first_order(2.0, 5.0, 1.0)
    for share, stable in ((0.9999, True), (1.0001, False)):
        controller = ideal(share * 0.5 / 1.25, action="direct")
        assert worst_case(uncertain(plant, gain=(0.8, 1.25)), controller).stable_for_all is stable
