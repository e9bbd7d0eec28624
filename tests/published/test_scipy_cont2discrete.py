"""Values that scipy's own tests assert (scipy/signal/tests/test_cont2discrete.py, BSD-3-Clause). Read."""

from __future__ import annotations

import numpy as np

from service.analysis.exponentials import exponentials_less_one
from service.analysis.scan import augmented
from tests.analysis.entered import ratio
from tests.published.held import ratio_in_z
from tests.published.reading import decimals, printed


def test_a_plant_of_second_order_that_passes_a_step_at_once() -> None:
    numerator, denominator, _ = ratio_in_z(ratio([0.25, 0.25, 0.5], [0.75, 0.75, 1.0]), 0.5)
    assert numerator.tolist() == [decimals(value, 9) for value in printed("E06")["num"]]
    assert denominator.tolist() == [decimals(value, 12) for value in printed("E06")["den"]]


def test_a_state_space_over_one_scan() -> None:
    a, b = np.array([[-0.3, 0.1], [0.2, -0.7]]), np.array([0.0, 1.0])
    scan = exponentials_less_one(augmented(a, b), np.array([0.05]))[0] + np.eye(3)
    assert scan[:2, :2].ravel().tolist() == [decimals(v, 14) for row in printed("E07")["Ad"] for v in row]
    assert scan[:2, 2].tolist() == [decimals(value, 14) for value in printed("E07")["Bd"]]
