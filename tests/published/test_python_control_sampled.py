"""Values about sampled loops that python-control's own tests assert (control/tests/margin_test.py and
timeresp_test.py, BSD-3-Clause). Read; the state space of the second is told from memory.
"""

from __future__ import annotations

import numpy as np

from service.analysis.controller import Scan
from service.analysis.exponentials import exponentials_less_one
from service.analysis.scan import augmented
from tests.analysis.entered import ideal, ratio
from tests.published.held import at_scans
from tests.published.reading import decimals, exact


def test_the_margins_of_three_lags_under_a_hold() -> None:
    gain_margin, phase_margin_deg, distance, phase_at, gain_at, nearest_at = exact("E02")
    found = at_scans(ratio([2.0], [1.0, 3.0, 3.0, 1.0]), ideal(1.0, scan=Scan(interval_s=0.1)))
    margins = found.margins
    assert margins is not None
    assert margins.gain_margin == decimals(gain_margin)
    assert margins.phase_margin_deg == decimals(phase_margin_deg)
    assert isinstance(margins.max_sensitivity, float)
    assert 1.0 / margins.max_sensitivity == decimals(distance)
    assert margins.max_sensitivity_rad_s == decimals(nearest_at)
    assert margins.phase_crossovers[0].rad_s == decimals(phase_at)
    assert margins.gain_crossovers[0].rad_s == decimals(gain_at)


def test_a_held_step_through_a_plant_that_passes_it_at_once() -> None:
    a, b = np.array([[1.0, -2.0], [3.0, -4.0]]), np.array([5.0, 7.0])
    scan = exponentials_less_one(augmented(a, b), np.array([1.0 / 9.0]))[0] + np.eye(3)
    state, answer = np.array([0.0, 0.0, 1.0]), []
    for _ in exact("C11"):
        answer.append(float(np.array([6.0, 8.0, 9.0]) @ state))
        state = scan @ state
    assert answer == [decimals(value, 4) for value in exact("C11")]
