"""What a change of gains does, in sentences; both loops of each test are recomputed."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from service.analysis.controller import Scan
from service.analysis.plant import PlantModel
from service.judgement.on_change import what_changes
from tests.judgement.loops import LAG, ideal, recomputed

SLOW, FAST = ideal(gain=1.0), ideal(gain=3.0)


def told(before: Any, after: Any, plant: PlantModel = LAG) -> str:
    return " ".join(what_changes(recomputed(plant, before), recomputed(plant, after)))


def test_the_same_gains_change_nothing() -> None:
    assert told(SLOW, SLOW) == ""


def test_more_gain_is_nearer_to_instability_and_faster() -> None:
    sentences = told(SLOW, FAST)
    assert "nearer to instability: maximum sensitivity" in sentences
    assert "PV rises" in sentences
    assert "times as fast" in sentences
    assert "throws PV less far" in sentences
    assert "Noise on PV moves the output 3.00 times more." in sentences


def test_the_way_back_says_the_opposite() -> None:
    sentences = told(FAST, SLOW)
    assert "further from instability" in sentences
    assert "more slowly" in sentences
    assert "throws PV further" in sentences
    assert "3.00 times less" in sentences


def test_the_figures_are_those_of_the_recomputations() -> None:
    sensitivities = []
    for gains in (SLOW, FAST):
        margins = recomputed(LAG, gains).continuous.margins
        assert margins is not None
        assert isinstance(margins.max_sensitivity, float)
        sensitivities.append(f"{margins.max_sensitivity:.3g}")
    assert f"maximum sensitivity {' → '.join(sensitivities)}" in told(SLOW, FAST)


def test_overshoot_is_told_as_damping() -> None:
    fast_integral = ideal(gain=3.0, integral_s=8.0)
    assert "less damped: overshoot" in told(FAST, fast_integral)
    assert "better damped" in told(fast_integral, FAST)


def test_an_offset_goes_with_integral_action_and_comes_without() -> None:
    proportional = ideal(gain=2.0, integral_s=None)
    assert "lasting offset after a step of the set point goes away" in told(proportional, ideal())
    assert "lasting offset under a lasting load comes in: 35.3 % of the step" in told(ideal(), proportional)


def test_an_unfiltered_derivative_lets_noise_through_without_limit() -> None:
    assert "without limit" in told(ideal(gain=0.5), ideal(gain=0.5, derivative_s=3.0))


def test_the_scan_is_a_change_like_any_other() -> None:
    scanned = replace(SLOW, scan=Scan(interval_s=10.0))
    sentences = told(SLOW, scanned)
    assert "nearer to instability" in sentences
    assert "judged as it is scanned" in sentences
    assert "judged as it is scanned" not in told(replace(SLOW, scan=Scan(interval_s=1.0)), scanned)


def test_a_loop_that_would_be_unstable_has_one_sentence() -> None:
    wild = recomputed(LAG, ideal(gain=30.0))
    assert what_changes(recomputed(LAG, SLOW), wild) == ("The loop was stable and would be unstable.",)
    assert what_changes(wild, wild) == ("The loop was unstable before and stays so.",)
