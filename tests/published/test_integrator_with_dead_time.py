"""An integrator under dead time and proportional control: Ku = π/(2·k·θ), Pu = 4·θ.

Found in most textbooks of process control (from memory). D. Di Ruscio, On tuning PI controllers for
integrating plus time delay systems, Modeling, Identification and Control 31 (2010) 145-164, uses it (read).
"""

from __future__ import annotations

import math

import pytest

from tests.analysis.entered import ideal, integrating
from tests.published.reading import analysis, decimals, exact


@pytest.mark.parametrize(("gain_per_s", "dead_time_s"), [(1.0, 1.0), (0.02, 7.0), (300.0, 1e-3)])
def test_ultimate_gain_and_period(gain_per_s: float, dead_time_s: float) -> None:
    found = analysis(integrating(gain_per_s, 0.0, dead_time_s), ideal(0.1 / (gain_per_s * dead_time_s)))
    assert found.margins is not None
    assert isinstance(found.margins.gain_margin, float)
    ultimate = 0.1 * found.margins.gain_margin
    assert ultimate == pytest.approx(0.5 * math.pi, rel=1e-13)
    assert ultimate == decimals(exact("B11")["Ku"])
    rad_s = found.crossovers.phase_crossovers[0].rad_s
    assert isinstance(rad_s, float)
    assert 2.0 * math.pi / rad_s == pytest.approx(exact("B11")["Pu"] * dead_time_s, rel=1e-13)


def test_the_product_of_gain_and_integral_time_of_ziegler_and_nichols() -> None:
    # Kc = Ku/2.2, Ti = Pu/1.2: k·Kc·Ti is 2.38 whatever the dead time (Di Ruscio 2010)
    found = analysis(integrating(0.02, 0.0, 7.0), ideal(1.0))
    assert found.margins is not None
    assert isinstance(found.margins.gain_margin, float)
    rad_s = found.crossovers.phase_crossovers[0].rad_s
    assert isinstance(rad_s, float)
    product = 0.02 * found.margins.gain_margin / 2.2 * (2.0 * math.pi / rad_s) / 1.2
    assert product == pytest.approx(math.pi**2 / (2.2 * 1.2) * 2.0 / math.pi, rel=1e-12)
    # the sixth decimal of the file is one too many
    assert product == decimals(exact("A33")["product"], 5)
