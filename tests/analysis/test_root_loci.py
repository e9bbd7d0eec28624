"""How far gain and dead time may go, and how the loop would swing there."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest

from service.analysis.controller import Scan
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Margins, RootLoci
from tests.analysis.entered import factors, first_order, ideal, integrating, resonant

CONDITIONAL = factors(1.0, [], [0.0, 0.0], 0.05), ideal(2.0, 8.0, 1.5, 0.05)
LOOPS: dict[str, tuple[PlantModel, Any]] = {
    "a lag": (first_order(2.0, 10.0, 3.0), ideal(1.0, 10.0)),
    "an integrator": (integrating(0.1, 2.0, 0.5), ideal(1.0, 20.0)),
    "a resonance": (resonant(1.0, 2.0, 0.05, 0.2), ideal(0.1, 6.0)),
    "a double integrator": CONDITIONAL,
}
SCANNED = [(name, scan) for name in LOOPS for scan in (None, Scan(interval_s=0.1))]


def loci(plant: PlantModel, controller: Any) -> RootLoci:
    curves = recompute(plant, controller, with_curves=True).curves
    assert curves is not None
    assert curves.root_loci is not None
    return curves.root_loci


def margins(plant: PlantModel, controller: Any) -> Margins:
    recomputed = recompute(plant, controller)
    found = (recomputed.sampled or recomputed.continuous).margins
    assert found is not None
    return found


def swing(plant: PlantModel, controller: Any, factor: float) -> tuple[float, float]:
    """(damping, frequency in rad/s) of the dominant pair with the gain multiplied."""
    gain = controller.proportional.value * factor
    recomputed = recompute(
        plant, replace(controller, proportional=replace(controller.proportional, value=gain))
    )
    root = (recomputed.sampled or recomputed.continuous).stability.dominant_roots[0].root
    assert isinstance(root, tuple)
    return root


@pytest.mark.parametrize(("name", "scan"), SCANNED)
def test_at_the_gain_margin_the_loop_swings_with_the_stated_period(name: str, scan: Scan | None) -> None:
    plant, controller = LOOPS[name][0], replace(LOOPS[name][1], scan=scan)
    found = margins(plant, controller)
    assert isinstance(found.gain_margin, float)
    assert isinstance(found.gain_margin_period_s, float)
    real, imaginary = swing(plant, controller, found.gain_margin)
    assert abs(real) < 1e-8 * imaginary
    assert imaginary == pytest.approx(2.0 * math.pi / found.gain_margin_period_s, rel=1e-8)


@pytest.mark.parametrize("scan", [None, Scan(interval_s=0.02)])
def test_so_it_does_at_the_reduction_margin(scan: Scan | None) -> None:
    plant, controller = CONDITIONAL[0], replace(CONDITIONAL[1], scan=scan)
    found = margins(plant, controller)
    assert isinstance(found.gain_reduction_margin, float)
    assert isinstance(found.gain_reduction_margin_period_s, float)
    real, imaginary = swing(plant, controller, found.gain_reduction_margin)
    assert abs(real) < 1e-8 * imaginary
    assert imaginary == pytest.approx(2.0 * math.pi / found.gain_reduction_margin_period_s, rel=1e-8)


def test_an_unstable_lag_with_too_little_gain_drifts_off_without_swinging() -> None:
    found = margins(first_order(-2.0, -10.0), ideal(1.0))
    assert found.gain_reduction_margin == pytest.approx(0.5)
    assert found.gain_reduction_margin_period_s == "unbounded"


def test_a_margin_that_does_not_exist_has_no_period() -> None:
    found = margins(first_order(2.0, 10.0), ideal(1.0))
    assert (found.gain_margin, found.gain_margin_period_s) == ("unbounded", None)


def test_at_the_nyquist_frequency_the_period_is_two_scans() -> None:
    found = margins(first_order(2.0, 10.0), ideal(1.0, scan=Scan(interval_s=3.0)))
    assert found.gain_margin_period_s == pytest.approx(6.0)


def test_the_root_of_a_lag_moves_with_the_gain_as_it_should() -> None:
    # 1 + 10·s + 2·k = 0
    for at in loci(first_order(2.0, 10.0), ideal(1.0)).gain:
        assert at.roots == (pytest.approx((-(1.0 + 2.0 * at.factor) / 10.0, 0.0), rel=1e-12),)


def test_the_loci_pass_through_the_roots_of_the_loop_itself() -> None:
    plant, controller = LOOPS["a lag"]
    stability = recompute(plant, controller).continuous.stability
    expected = [
        root.root if isinstance(root.root, tuple) else (root.root, 0.0) for root in stability.dominant_roots
    ]
    found = loci(plant, controller)
    for at in (*found.gain, *found.dead_time):
        if at.factor == pytest.approx(1.0):
            assert [pytest.approx(root, rel=1e-9, abs=1e-12) for root in at.roots] == expected
    assert [at.factor for at in found.dead_time][:5:4] == [0.0, 1.0]


def test_a_root_crosses_the_axis_where_the_delay_margin_says() -> None:
    plant, controller = LOOPS["a lag"]
    delay = margins(plant, controller).delay_margin_s
    assert isinstance(delay, float)
    for at in loci(plant, controller).dead_time:
        assert (at.roots[0][0] > 0) == (3.0 * at.factor > 3.0 + delay)


def test_without_dead_time_there_is_nothing_to_multiply() -> None:
    assert loci(first_order(2.0, 10.0), ideal(1.0)).dead_time == ()
