"""G. F. Franklin, J. D. Powell, M. L. Workman, Digital Control of Dynamic Systems: e^(−1.5·s)/(s+1) under a
hold of 1 s. From memory.
"""

from __future__ import annotations

import numpy as np
import pytest

from service.analysis.controller import Scan
from tests.analysis.entered import first_order, ideal
from tests.published.held import at_scans, ratio_in_z, zeros_in_z
from tests.published.reading import decimals, exact

PLANT = first_order(1.0, 1.0, 1.5)


def test_a_lag_whose_dead_time_divides_a_scan() -> None:
    truth = exact("E09")
    numerator, denominator, whole = ratio_in_z(PLANT, 1.0)
    assert whole == 1
    assert float(numerator[1]) == decimals(truth["b1"], 8)
    assert float(-numerator[2] / numerator[1]) == decimals(truth["zero"], 8)
    assert denominator.tolist() == [pytest.approx(1.0), pytest.approx(-truth["pole"], abs=1e-9), 0.0]
    assert zeros_in_z(PLANT, 1.0).real.tolist() == [decimals(truth["zero"], 8)]


@pytest.mark.parametrize("gain", [0.3, 0.9, 1.4, 3.0])
def test_the_closed_loop_of_that_plant(gain: float) -> None:
    b1, zero, pole = (exact("E09")[name] for name in ("b1", "zero", "pole"))
    roots = np.roots([1.0, -pole, gain * b1, -gain * b1 * zero])
    found = at_scans(PLANT, ideal(gain, scan=Scan(interval_s=1.0)))
    assert found.stability.spectral_radius == pytest.approx(np.abs(roots).max(), rel=1e-7)
    assert found.stability.unstable_roots == np.count_nonzero(np.abs(roots) > 1)
