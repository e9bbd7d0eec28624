"""A plant over one scan as a ratio of polynomials in z, for the tables of sampled plants."""

from __future__ import annotations

from typing import Any

import numpy as np

from service.analysis.controller import Scan
from service.analysis.loop import form_loop
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis
from service.analysis.sampled_loop import form_sampled_loop
from service.analysis.scan import SampledPlant, Scanned
from tests.analysis.entered import ideal


def held(plant: PlantModel, interval_s: float) -> SampledPlant:
    """The plant over one scan."""
    return _scanned(plant, interval_s).sample()


def ratio_in_z(plant: PlantModel, interval_s: float) -> tuple[Any, Any, int]:
    """(numerator, denominator, k): the plant over one scan but for k whole scans, highest power first."""
    sampled = held(plant, interval_s)
    phi = sampled.phi_less_one + np.eye(len(sampled.phi_less_one))
    denominator = np.poly(phi)
    new, old = (
        np.poly(phi - np.outer(gamma, sampled.c)) - denominator for gamma in (sampled.gamma0, sampled.gamma1)
    )
    if sampled.fraction == 0:
        # the direct path, where a table lets it act at once
        return new + sampled.d * denominator, denominator, sampled.whole_scans
    return np.append(new, 0.0) + np.append(0.0, old), np.append(denominator, 0.0), sampled.whole_scans


def zeros_in_z(plant: PlantModel, interval_s: float) -> Any:
    """The zeros of the sampled plant, increasing, but one at −1, which the service tells as infinity."""
    w = form_sampled_loop(_scanned(plant, interval_s)).loop.zeros
    # w = 1 is z = ∞: the plant answers no sooner than a scan later
    w = w[np.abs(w - 1.0) > 1e-9]
    return np.sort_complex((1.0 + w) / (1.0 - w))


def at_scans(plant: PlantModel, controller: Any) -> Analysis:
    """The sampled analysis of a loop."""
    found = recompute(plant, controller).sampled
    assert found is not None
    return found


def _scanned(plant: PlantModel, interval_s: float) -> Scanned:
    scan = Scan(interval_s=interval_s)
    return Scanned.of(form_loop(plant, ideal(1.0, scan=scan), None), scan)
