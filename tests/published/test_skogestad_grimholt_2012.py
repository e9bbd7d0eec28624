"""S. Skogestad, C. Grimholt, The SIMC method for smooth PID controller tuning.

Chapter 5 of PID Control in the Third Millennium, Springer 2012, DOI 10.1007/978-1-4471-2425-2_5: the
relations of the tuning constant τc to the margins. From memory.
"""

from __future__ import annotations

import math

import pytest

from tests.analysis.entered import ideal, integrating
from tests.published.reading import analysis, assert_margins, exact


@pytest.mark.parametrize("share", [0.5, 1, 2, 3])
def test_the_margins_by_the_tuning_constant_over_the_dead_time(share: float) -> None:
    # L = e^(−θs)/((τc+θ)·s), θ = 1
    found = analysis(integrating(1.0, 0.0, 1.0), ideal(1.0 / (share + 1.0)))
    assert_margins(found, exact("A23")[f"x={share}"])
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(0.5 * math.pi * (share + 1.0), rel=1e-13)
    assert found.margins.phase_margin_deg == pytest.approx(
        90.0 - math.degrees(1.0 / (share + 1.0)), rel=1e-13
    )
    assert found.margins.delay_margin_s == pytest.approx(0.5 * math.pi * (share + 1.0) - 1.0, rel=1e-13)
