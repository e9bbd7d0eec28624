"""The published values, and how near a recomputed one has to come."""

from __future__ import annotations

from typing import Any

import pytest

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis
from tests.checks.loops import published

PUBLISHED = published()


def exact(name: str) -> Any:
    """What an independent recomputation says."""
    return PUBLISHED[name]["exact"]


def printed(name: str) -> Any:
    """What the source prints."""
    return PUBLISHED[name]["printed"]


def decimals(value: float, count: int = 6) -> Any:
    """Equal to so many decimals: half a unit of the last one, and a tenth of that for a tie."""
    return pytest.approx(value, rel=0.0, abs=0.55 * 10.0**-count)


def analysis(plant: PlantModel, controller: Controller, **more: Any) -> Analysis:
    """The continuous analysis of a loop."""
    return recompute(plant, controller, **more).continuous


def assert_margins(found: Analysis, truth: dict[str, float], time_s: float = 1.0) -> None:
    """Every margin of `truth`, by the names of the file of published values."""
    assert found.stability.verdict == "stable"
    assert found.margins is not None
    margins, crossovers = found.margins, found.crossovers
    recomputed: dict[str, Any] = {
        "GM": margins.gain_margin,
        "PM_deg": margins.phase_margin_deg,
        "PM": margins.phase_margin_deg,
        "Ms": margins.max_sensitivity,
        "Ms_w": margins.max_sensitivity_rad_s,
        "Mt": margins.max_complementary_sensitivity,
        "DM": margins.delay_margin_s,
        "delay_margin_over_theta": margins.delay_margin_s,
        "w180_theta": crossovers.phase_crossovers[0].rad_s if crossovers.phase_crossovers else None,
        "w180": crossovers.phase_crossovers[0].rad_s if crossovers.phase_crossovers else None,
        "wc_theta": crossovers.gain_crossovers[0].rad_s,
        "wc": crossovers.gain_crossovers[0].rad_s,
    }
    for name, value in truth.items():
        assert recomputed[name] == decimals(value), name
