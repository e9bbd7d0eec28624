"""K. J. Åström, P. Hagander, J. Sternby, Zeros of sampled systems, Automatica 20 (1984): with n poles more
than zeros the n − 1 zeros that the hold adds tend to the roots of the Euler-Frobenius polynomials.
From memory.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests.analysis.entered import factors, lags
from tests.published.held import zeros_in_z

# by rising order: z + 1, z² + 4z + 1, z³ + 11z² + 11z + 1, z⁴ + 26z³ + 66z² + 26z + 1
EULER_FROBENIUS = {3: [1, 4, 1], 4: [1, 11, 11, 1], 5: [1, 26, 66, 26, 1]}


def limits(order: int) -> Any:
    roots = np.sort(np.roots(EULER_FROBENIUS[order]).real)
    # −1 itself is infinity in the service's variable
    return roots[np.abs(roots + 1) > 1e-9]


@pytest.mark.parametrize("order", EULER_FROBENIUS)
def test_the_zeros_of_several_integrators_whatever_the_scan(order: int) -> None:
    found = zeros_in_z(factors(1.0, [], [0.0] * order), 0.7)
    assert found.real == pytest.approx(limits(order), rel=1e-6)
    assert found.imag == pytest.approx(np.zeros(len(found)), abs=1e-6)


@pytest.mark.parametrize("order", EULER_FROBENIUS)
def test_the_zeros_of_equal_lags_tend_there_in_proportion_to_the_scan(order: int) -> None:
    distances = []
    for interval_s in (0.04, 0.02):
        found = zeros_in_z(lags(1.0, [2.0] * order), interval_s)
        nearest = [float(np.abs(found - root).min() / abs(root)) for root in limits(order)]
        distances.append(max(nearest))
    assert distances[0] < 0.05
    assert distances[0] / distances[1] == pytest.approx(2.0, rel=0.05)


def test_a_zero_of_the_plant_tends_to_its_place_under_the_hold() -> None:
    # exp(z·h) to the first order in h
    for interval_s in (0.02, 0.01):
        found = zeros_in_z(lags(1.0, [3.0, 2.0], [5.0]), interval_s)
        assert found.real == pytest.approx([np.exp(-interval_s / 5.0)], abs=interval_s**2)
