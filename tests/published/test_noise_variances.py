"""Variances of first-order processes: K. J. Åström, Introduction to Stochastic Control Theory (1970); G. E.
P. Box, G. M. Jenkins, Time Series Analysis (1970): x[n+1] = a·x[n] + e[n] has variance 1/(1 − a²).
From memory.
"""

from __future__ import annotations

import math

import pytest

from service.analysis.controller import Scan
from tests.analysis.entered import factors, first_order, ideal, integrating
from tests.published.held import at_scans


@pytest.mark.parametrize("g", [0.02, 0.5, 1.0, 1.7])
def test_an_integrator_under_proportional_control(g: float) -> None:
    # PV is first order with a = 1 − g, driven by −g·e; the output adds the scan's own noise
    h, k = 0.5, 0.8
    gain = g / (k * h)
    noise = at_scans(integrating(k), ideal(gain, scan=Scan(interval_s=h))).noise
    assert noise is not None
    variance = gain**2 * (1.0 + g * g / (1.0 - (1.0 - g) ** 2))
    assert noise.output_std_per_noise_std == pytest.approx(math.sqrt(variance), rel=1e-10)
    # Cov(u[n], u[n−1]) = −Kc²·g/(2 − g); the mean magnitude of a normal variable is √(2/π)
    moves = 2.0 * variance + 2.0 * gain**2 * g / (2.0 - g)
    assert noise.output_travel_per_scan == pytest.approx(math.sqrt(2.0 / math.pi * moves), rel=1e-10)
    assert noise.derivative_share == 0.0


@pytest.mark.parametrize("gain", [0.3, 2.0, 6.0])
def test_a_lag_under_proportional_control(gain: float) -> None:
    h, plant_gain, pole = 1.0, 0.7, math.exp(-1.0 / 4.0)
    b = plant_gain * (1 - pole)
    a = pole - b * gain
    noise = at_scans(first_order(plant_gain, 4.0), ideal(gain, scan=Scan(interval_s=h))).noise
    assert noise is not None
    variance = gain**2 * (1.0 + (b * gain) ** 2 / (1.0 - a * a))
    assert noise.output_std_per_noise_std == pytest.approx(math.sqrt(variance), rel=1e-10)


@pytest.mark.parametrize("r", [0.05, 0.6, 1.0, 1.5])
def test_integral_control_of_a_plant_that_is_nothing_but_a_gain(r: float) -> None:
    # u[n] = u[n−1] − Ki·h·(K·u[n−1] + e[n]): first order with a = 1 − r, r = Ki·h·K
    h, plant_gain = 0.5, 0.8
    ki = r / (h * plant_gain)
    noise = at_scans(factors(plant_gain, [], []), ideal(None, 1.0 / ki, scan=Scan(interval_s=h))).noise
    assert noise is not None
    variance = (ki * h) ** 2 / (1.0 - (1.0 - r) ** 2)
    assert noise.output_std_per_noise_std == pytest.approx(math.sqrt(variance), rel=1e-10)
    # Var Δu = 2·(1 − a)·Var u
    assert noise.output_travel_per_scan == pytest.approx(
        math.sqrt(2.0 / math.pi * 2.0 * r * variance), rel=1e-10
    )
