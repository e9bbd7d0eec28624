"""K. J. Åström, B. Wittenmark, Computer-Controlled Systems (3rd ed. 1997): the table of plants under a
zero-order hold (table 2.1), dead time that divides a scan (section 2.3), and dead-beat control. From memory.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.analysis.controller import Scan
from tests.analysis.entered import first_order, ideal, integrating, parallel, ratio, resonant
from tests.published.held import at_scans, held, ratio_in_z
from tests.published.reading import analysis, decimals, exact

every_interval = pytest.mark.parametrize("h", [0.05, 0.7, 3.0])


@every_interval
def test_an_integrator(h: float) -> None:
    numerator, denominator, _ = ratio_in_z(integrating(1.0), h)
    assert numerator == pytest.approx([0.0, h], rel=1e-13)
    assert denominator == pytest.approx([1.0, -1.0], rel=1e-13)


@every_interval
def test_two_integrators(h: float) -> None:
    numerator, denominator, _ = ratio_in_z(ratio([1.0], [1.0, 0.0, 0.0]), h)
    assert numerator == pytest.approx([0.0, h * h / 2, h * h / 2], rel=1e-12)
    assert denominator == pytest.approx([1.0, -2.0, 1.0], rel=1e-12)


@every_interval
def test_a_lag(h: float) -> None:
    a = 0.8
    numerator, denominator, _ = ratio_in_z(ratio([a], [1.0, a]), h)
    assert numerator == pytest.approx([0.0, 1.0 - math.exp(-a * h)], rel=1e-12)
    assert denominator == pytest.approx([1.0, -math.exp(-a * h)], rel=1e-12)


@every_interval
def test_an_integrator_with_a_lag(h: float) -> None:
    a = 0.8
    e = math.exp(-a * h)
    numerator, denominator, _ = ratio_in_z(ratio([a], [1.0, a, 0.0]), h)
    assert numerator == pytest.approx([0.0, (a * h - 1 + e) / a, (1 - e - a * h * e) / a], rel=1e-11)
    assert denominator == pytest.approx([1.0, -(1 + e), e], rel=1e-12)


@every_interval
def test_two_lags(h: float) -> None:
    a, b = 0.4, 1.5
    ea, eb = math.exp(-a * h), math.exp(-b * h)
    numerator, denominator, _ = ratio_in_z(ratio([a * b], [1.0, a + b, a * b]), h)
    b1 = (b * (1 - ea) - a * (1 - eb)) / (b - a)
    b2 = (a * (1 - eb) * ea - b * (1 - ea) * eb) / (b - a)
    assert numerator == pytest.approx([0.0, b1, b2], rel=1e-11)
    assert denominator == pytest.approx([1.0, -(ea + eb), ea * eb], rel=1e-12)


@every_interval
@pytest.mark.parametrize("zeta", [0.05, 0.7])
def test_an_oscillation(zeta: float, h: float) -> None:
    omega0 = 1.3
    omega = omega0 * math.sqrt(1 - zeta**2)
    alpha, beta, gamma = math.exp(-zeta * omega0 * h), math.cos(omega * h), math.sin(omega * h)
    numerator, denominator, _ = ratio_in_z(resonant(1.0, omega0, zeta), h)
    b1 = 1 - alpha * (beta + zeta * omega0 / omega * gamma)
    b2 = alpha**2 + alpha * (zeta * omega0 / omega * gamma - beta)
    assert numerator == pytest.approx([0.0, b1, b2], rel=1e-10, abs=1e-14)
    assert denominator == pytest.approx([1.0, -2 * alpha * beta, alpha**2], rel=1e-12)


def test_dead_time_that_divides_a_scan() -> None:
    sampled = held(first_order(1.0, 1.0, 0.4), 1.0)
    truth = exact("E10")
    assert 1.0 + float(sampled.phi_less_one[0, 0]) == decimals(truth["Phi"], 9)
    assert float(sampled.c[0] * sampled.gamma0[0]) == decimals(truth["Gamma0"], 9)
    assert float(sampled.c[0] * sampled.gamma1[0]) == decimals(truth["Gamma1"], 9)


@pytest.mark.parametrize("tau", [0.0, 0.1, 0.5, 0.999, 1.0, 2.3])
def test_dead_time_leaves_the_static_gain(tau: float) -> None:
    sampled = held(first_order(1.7, 1.0, tau), 1.0)
    together = float(sampled.c[0] * (sampled.gamma0[0] + sampled.gamma1[0]))
    assert together == pytest.approx(-1.7 * float(sampled.phi_less_one[0, 0]), rel=1e-13)


def test_the_hold_takes_about_half_a_scan_of_phase() -> None:
    # common practice: the phase margin falls by ωc·h/2
    h, plant = 0.1, ratio([2.0], [1.0, 3.0, 3.0, 1.0])
    rule, sampled = exact("E05")["E02"]
    continuous = analysis(plant, ideal(1.0))
    assert continuous.margins is not None
    crossover = continuous.crossovers.gain_crossovers[0]
    assert crossover.phase_margin_deg - math.degrees(crossover.rad_s * h / 2) == decimals(rule, 4)
    found = at_scans(plant, ideal(1.0, scan=Scan(interval_s=h)))
    assert found.margins is not None
    assert found.margins.phase_margin_deg == decimals(sampled)


@pytest.mark.parametrize("h", [0.2, 1.0, 4.0])
def test_dead_beat_control_of_a_lag_has_every_root_at_the_origin(h: float) -> None:
    gain, pole = 1.6, math.exp(-h / 2.0)
    b = gain * (1 - pole)
    # z² − (1 + p − b·(Kp + Ki·h))·z + p − b·Kp = z²
    controller = parallel(pole / b, 1.0 / (b * h), scan=Scan(interval_s=h))
    found = at_scans(first_order(gain, 2.0), controller)
    assert found.stability.verdict == "stable"
    # a double root at 0 is known to the square root of the rounding
    assert found.stability.spectral_radius == pytest.approx(0.0, abs=1e-7)
    step = found.setpoint_step
    assert step is not None
    assert isinstance(step.settling_time_s, float)
    assert step.settling_time_s <= 2 * h
    # u: the first two scans, then at rest
    first = pole / b + 1.0 / b
    assert step.output_peak == pytest.approx(max(first, 1.0 / gain), rel=1e-9)
    assert step.output_total_variation is not None


@pytest.mark.parametrize("h", [0.2, 5.0])
def test_dead_beat_control_of_an_integrator_is_there_after_one_scan(h: float) -> None:
    found = at_scans(integrating(0.5), ideal(1.0 / (0.5 * h), scan=Scan(interval_s=h)))
    assert found.stability.spectral_radius == pytest.approx(0.0, abs=1e-12)
    step = found.setpoint_step
    assert step is not None
    assert step.rise_time_s == pytest.approx(0.8 * h, rel=1e-12)
    assert step.settling_time_s == pytest.approx(0.98 * h, rel=1e-12)
    assert step.iae == pytest.approx(h / 2, rel=1e-12)
    assert step.ise == pytest.approx(h / 3, rel=1e-12)
    assert step.itae == pytest.approx(h * h / 6, rel=1e-12)
    assert step.overshoot_percent == 0
    assert found.noise is not None
    gain = 2.0 / h
    # u answers one scan's noise by Kc, and by −(−Kc·K·h)·Kc a scan later
    assert found.noise.output_std_per_noise_std == pytest.approx(gain * np.sqrt(2.0), rel=1e-12)
