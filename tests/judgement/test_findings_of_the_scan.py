"""What is found in a loop because it is scanned; every loop here is recomputed."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from service.analysis import peaks
from service.analysis.controller import Scan
from service.analysis.plant import FirstOrder
from service.analysis.recomputation import recompute
from service.analysis.results import Recomputation
from service.judgement.criteria import Criteria, judge
from service.judgement.finding import Finding
from service.judgement.findings import find
from tests.judgement.loops import LAG, ideal, recomputed


def scanned(interval_s: float, method: Any = "backward_difference", **gains: Any) -> Recomputation:
    return recomputed(LAG, ideal(**gains, scan=Scan(interval_s=interval_s, method=method)))


def found(recomputation: Recomputation) -> dict[str, Finding]:
    return {finding.finding: finding for finding in find(recomputation)}


def test_a_fast_scan_adds_nothing() -> None:
    assert list(found(scanned(0.5))) == ["loop_type"]


def test_a_scan_that_destabilises_is_told() -> None:
    slow = scanned(20.0, gain=5.0)
    assert slow.continuous.stability.verdict == "stable"
    assert slow.verdict == "unstable"
    assert {"unstable", "scan_destabilises"} <= set(found(slow))


def test_a_loop_that_only_its_scan_stabilises_is_told_and_not_called_stable() -> None:
    # an unfiltered derivative acts on every frequency, and at a scan on none beyond half of the scan's own
    alone = scanned(20.0, gain=0.5, derivative_s=55.0)
    assert alone.continuous.stability.verdict == "unstable"
    assert alone.sampled is not None
    assert alone.sampled.stability.verdict == "stable"
    assert alone.verdict == "unstable"
    assert found(alone)["scan_alone_stabilises"].weight == "stop"


def test_phase_that_the_scan_takes_is_told_in_degrees() -> None:
    slow = scanned(8.0)
    assert slow.sampled is not None
    margins = slow.sampled.margins, slow.continuous.margins
    assert margins[0] is not None
    assert margins[1] is not None
    with_scan, without = (part.phase_margin_deg for part in margins if part)
    sentence = found(slow)["scan_takes_phase"].sentence
    assert f"{float(without) - float(with_scan):.3g}° of the {float(without):.3g}°" in sentence
    assert "common practice" in sentence


@pytest.mark.parametrize(("filter_s", "rings"), [(0.4, True), (0.6, False)])
def test_a_filter_time_below_half_a_scan_rings(filter_s: float, rings: bool) -> None:
    loop = scanned(1.0, "trapezoidal", derivative_s=3.0, filter_s=filter_s)
    assert ("filter_rings_at_scan" in found(loop)) == rings


def test_a_short_filter_on_the_measured_value_rings_too() -> None:
    loop = scanned(1.0, "trapezoidal", measurement_filter_s=0.3)
    assert "of the measured value (0.300 s)" in found(loop)["filter_rings_at_scan"].sentence


def test_by_the_backward_difference_no_filter_rings() -> None:
    assert "filter_rings_at_scan" not in found(scanned(1.0, derivative_s=3.0, filter_s=0.1))


def test_gains_that_wear_a_valve_are_told_with_the_derivative_s_part_in_it() -> None:
    told = found(scanned(0.5, derivative_s=8.0, filter_s=0.4))["noise_moves_output"]
    assert told.weight == "caution"
    assert "through the derivative" in told.sentence
    assert "common practice" in told.sentence


def test_without_a_scan_the_gain_at_high_frequency_tells_of_wear() -> None:
    told = found(recomputed(LAG, ideal(derivative_s=8.0, filter_s=0.4)))["noise_moves_output"]
    assert "42.0 times" in told.sentence


FAR = FirstOrder(kind="first_order", gain=1.0, time_constant_s=1.0, dead_time_s=500.0)
SHARP = ideal(gain=0.02, integral_s=60.0, derivative_s=2.0, filter_s=0.01)


def test_amplified_noise_whose_worst_frequency_was_not_found_is_told_and_not_assessed() -> None:
    far = recomputed(FAR, SHARP)
    assert far.continuous.margins is not None
    assert far.continuous.noise is not None
    assert far.continuous.noise.max_control_sensitivity is None
    assert "no maximum control sensitivity" in found(far)["control_sensitivity_too_much_work"].sentence
    (limit,) = judge(far, Criteria(max_control_sensitivity_max=10.0))
    assert limit.outcome == "not_assessed"


def test_amplified_noise_of_a_scanned_loop_whose_worst_frequency_was_not_found_is_told(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    # no scanned loop is known whose search is that long, since its frequencies end; the bound is lowered
    monkeypatch.setattr(peaks, "MAX_PEAK_POINTS", 150)
    far = recompute(FAR, replace(SHARP, scan=Scan(interval_s=0.001, method="backward_difference")))
    assert far.sampled is not None
    assert far.sampled.margins is not None
    assert far.sampled.noise is not None
    assert far.sampled.noise.max_control_sensitivity is None
    assert "control_sensitivity_too_much_work" in far.sampled.notes


def test_noise_amplified_without_limit_was_not_left_out() -> None:
    unfiltered = recomputed(LAG, ideal(derivative_s=2.0))
    assert unfiltered.continuous.noise is not None
    assert unfiltered.continuous.noise.max_control_sensitivity == "unbounded"
    assert "control_sensitivity_too_much_work" not in found(unfiltered)
