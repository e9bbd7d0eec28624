"""K. Ogata, Discrete-Time Control Systems: two polynomials tried by Jury's criterion. From memory.

A plant with one scan of dead time under proportional control has z·(z−p1)·(z−p2) + b1·z + b2 for its closed
loop; the lags p and their shares are chosen to make it the book's polynomial.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from service.analysis.controller import Scan
from tests.analysis.entered import ideal, ratio
from tests.published.held import at_scans
from tests.published.reading import PUBLISHED, exact

LAGS = {"crit": (0.7, 0.4), "unst": (0.7, 0.6)}


def plant_for(name: str, gain: float = 1.0) -> Any:
    _, square, linear, constant = PUBLISHED["B22"]["inputs"][name]
    p1, p2 = LAGS[name]
    assert p1 + p2 == pytest.approx(-square)
    b1, b2 = linear - p1 * p2, constant
    a1, a2 = -math.log(p1), -math.log(p2)
    share1 = (b1 * p1 + b2) / (p1 - p2) / (1 - p1)
    share2 = (b1 * p2 + b2) / (p2 - p1) / (1 - p2)
    numerator = share1 * a1 * np.array([1.0, a2]) + share2 * a2 * np.array([1.0, a1])
    return ratio(gain * numerator, np.polymul([1.0, a1], [1.0, a2]), 1.0)


def test_the_unstable_one() -> None:
    found = at_scans(plant_for("unst"), ideal(1.0, scan=Scan(interval_s=1.0)))
    assert found.stability.verdict == "unstable"
    assert found.stability.unstable_roots == 1
    assert found.stability.spectral_radius == pytest.approx(max(exact("B22")["unst"]), rel=1e-12)


def test_the_critical_one_is_not_called_stable() -> None:
    found = at_scans(plant_for("crit"), ideal(1.0, scan=Scan(interval_s=1.0)))
    assert found.stability.verdict == "undecided"
    assert 1.0 in exact("B22")["crit"]


@pytest.mark.parametrize(("gain", "verdict"), [(1 - 1e-6, "stable"), (1 + 1e-6, "unstable")])
def test_beside_the_critical_one_it_is_decided(gain: float, verdict: str) -> None:
    found = at_scans(plant_for("crit", gain), ideal(1.0, scan=Scan(interval_s=1.0)))
    assert found.stability.verdict == verdict
