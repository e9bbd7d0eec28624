"""G. J. Silva, A. Datta, S. P. Bhattacharyya, PI stabilization of first-order systems with time delay.

Automatica 37 (2001) 2025-2031: the largest stabilising proportional gain in closed form. From memory.
"""

from __future__ import annotations

import math

import pytest
from scipy.optimize import brentq

from tests.analysis.entered import first_order, ideal
from tests.published.reading import analysis, exact


def largest_gain(gain: float, time_constant: float, dead_time: float) -> float:
    """(T/(k·L))·sqrt(z² + L²/T²), z the root of tan z = −(T/L)·z between π/2 and π."""
    ratio = time_constant / dead_time
    z = brentq(lambda z: math.sin(z) + ratio * z * math.cos(z), math.pi / 2, math.pi, xtol=1e-14)
    return ratio / gain * math.sqrt(z * z + 1.0 / ratio**2)


@pytest.mark.parametrize("gain", [1.0, 0.3])
@pytest.mark.parametrize("share", [0.01, 0.2, 1.0, 4.0, 50.0])
def test_the_largest_proportional_gain_is_the_ultimate_one(gain: float, share: float) -> None:
    largest = largest_gain(gain, 10.0, 10.0 * share)
    margins = analysis(first_order(gain, 10.0, 10.0 * share), ideal(0.5 * largest)).margins
    assert margins is not None
    assert margins.gain_margin == pytest.approx(2.0, rel=1e-12)


def test_the_example_of_the_file() -> None:
    # k = 1, T = 1, L = 2 has the value that the file tells
    margins = analysis(first_order(1.0, 1.0, 2.0), ideal(1.0)).margins
    assert margins is not None
    assert margins.gain_margin == pytest.approx(exact("B09")["kp_max"], rel=1e-9)
