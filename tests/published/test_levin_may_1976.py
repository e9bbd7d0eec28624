"""S. A. Levin, R. M. May, A note on difference-delay equations, Theoretical Population Biology 9 (1976):
x[n+1] = x[n] − g·x[n−k] is stable if and only if 0 < g < 2·cos(k·π/(2k+1)). From memory.

It is an integrator under proportional control with k whole scans of dead time, g = Kc·K·h.
"""

from __future__ import annotations

import math

import pytest

from service.analysis.controller import Scan
from tests.analysis.entered import ideal, integrating
from tests.published.held import at_scans


def limit(k: int) -> float:
    return 2.0 * math.cos(k * math.pi / (2 * k + 1))


@pytest.mark.parametrize("k", [0, 1, 2, 3, 7, 20, 59, 61, 150])
def test_the_largest_gain_of_an_integrator_with_whole_scans_of_dead_time(k: int) -> None:
    h, share = 0.4, 0.3
    controller = ideal(share * limit(k) / (0.5 * h), scan=Scan(interval_s=h))
    found = at_scans(integrating(0.5, dead_time_s=k * h), controller)
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(1.0 / share, rel=1e-11)


@pytest.mark.parametrize("k", [0, 1, 2, 5, 30, 100])
@pytest.mark.parametrize(("factor", "verdict", "roots"), [(1 - 1e-6, "stable", 0), (1 + 1e-6, "unstable", 2)])
def test_beside_it_the_verdict(k: int, factor: float, verdict: str, roots: int) -> None:
    found = at_scans(
        integrating(1.0, dead_time_s=float(k)), ideal(factor * limit(k), scan=Scan(interval_s=1.0))
    )
    assert found.stability.verdict == verdict
    # without dead time it is one real root, that passes z = −1
    assert found.stability.unstable_roots == (roots if k else roots // 2)
