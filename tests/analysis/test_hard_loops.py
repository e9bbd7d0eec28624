"""Hard loops against slow references: winding counts, roots, margins at fifty digits, marched responses.

The loops are invented; what is hard about each stands in its name. The references read the same dataclasses
by the interface's definitions and share no code with the service (`tests.references`).
"""

from __future__ import annotations

import math
from functools import cache
from typing import Any

import pytest

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Recomputation
from tests.analysis.entered import (
    factors,
    first_order,
    ideal,
    integrating,
    lags,
    parallel,
    ratio,
    resonant,
    series,
    two_zeros,
)
from tests.references.characteristic_roots import rightmost_root
from tests.references.marching import Marched, march
from tests.references.margins import ReferenceMargins, reference_margins
from tests.references.measures import load_measures, setpoint_measures
from tests.references.told import ExactLoop, exact_loop
from tests.references.winding import roots_right_of

Loop = tuple[PlantModel, Controller]


def pair(real: float, imag: float) -> list[tuple[float, float]]:
    return [(real, imag), (real, -imag)]


def resonance(damping: float, angle: float, kc: float) -> Loop:
    """A resonance at 1 rad/s under a dead time of `angle` rad there; its peak in L is about `kc`."""
    return resonant(2.0 * damping, 1.0, damping, angle), ideal(kc, max(4.0 * damping * angle, 0.5))


TURN = 2.0 * math.pi

LIGHT_RESONANCES: dict[str, Loop] = {
    # the peak stands above 1 and points away from −1 at 3π/2 and the turns beyond it
    f"resonance of damping {damping}, dead time {angle:.1f} rad, peak {kc}": resonance(damping, angle, kc)
    for damping, angle, kc in [
        (0.02, 0.75 * TURN, 1.1),
        (0.005, 1.75 * TURN, 2.0),
        (0.02, 4.5 * TURN, 1.1),
        (0.001, 4.75 * TURN, 2.0),
        (0.005, 4.75 * TURN, 2.0),
        (0.005, 15.5 * TURN, 1.1),
        (0.001, 15.75 * TURN, 2.0),
        # and here it all but touches −1
        (0.001, 1.25 * TURN, 0.9),
        (0.005, 15.25 * TURN, 0.9),
        (0.001, 4.25 * TURN, 0.9),
    ]
}

UNSTABLE_RESONANCES: dict[str, Loop] = {
    f"resonance of damping {damping}, dead time {angle:.1f} rad, peak {kc} at −1": resonance(
        damping, angle, kc
    )
    for damping, angle, kc in [
        (0.005, 0.25 * TURN, 1.1),
        (0.02, 4.25 * TURN, 1.1),
        (0.001, 4.0 * TURN, 0.9),
        (0.005, 15.25 * TURN, 1.1),
        (0.02, 15.75 * TURN, 2.0),
    ]
}

THREE_MODES = (
    [*pair(-0.02, 1.5), *pair(-0.04, 3.1)],
    [*pair(-0.01, 1.0), *pair(-0.02, 2.2), *pair(-0.04, 4.5)],
)
TWO_MODES = (pair(-0.02, 1.5), [*pair(-0.01, 1.0), *pair(-0.02, 3.0)])

SEVERAL_CROSSOVERS: dict[str, Loop] = {
    "five gain crossovers": (factors(4.0, *TWO_MODES, 0.1), ideal(0.3, 6.0, 0.3, 0.01)),
    "seven gain crossovers": (factors(4.5, *THREE_MODES, 0.1), ideal(0.8, 9.0, 0.3, 0.01)),
    "seven gain crossovers without dead time": (factors(4.5, *THREE_MODES), ideal(0.5, 9.0, 1.0, 0.01)),
    "a flexible plant that integrates": (
        factors(0.05, pair(-0.01, 2.0), [0.0, *pair(-0.02, 2.6), -8.0], 0.05),
        ideal(4.0, 12.0, 0.4, 0.05),
    ),
}

CONDITIONALLY_STABLE: dict[str, Loop] = {
    # a double integrator or unstable poles need gain, and too much of it destabilises
    "double integrator under PID": (factors(1.0, [], [0.0, 0.0], 0.05), ideal(2.0, 8.0, 1.5, 0.05)),
    "triple lag in the origin by two zeros": (
        factors(4.0, [-0.5, -0.7], [0.0, 0.0, -30.0, -40.0], 0.002),
        ideal(60.0, 20.0),
    ),
    "two unstable lags": (factors(1.0, [-0.8], [0.2, 0.3, -9.0], 0.05), ideal(12.0, 9.0, 0.6, 0.06)),
    "an unstable pair under dead time": (
        factors(1.2, [-0.6], [*pair(0.1, 1.0), -12.0], 0.03),
        ideal(30.0, 6.0, 0.2, 0.02),
    ),
}

UNSTABLE_LAGS: dict[str, Loop] = {
    f"unstable lag with dead time {share} of it": (
        first_order(-1.0, -10.0, 10.0 * share),
        ideal(kc, 10.0 * ti),
    )
    for share, kc, ti in [
        (0.01, 30.0, 0.3),
        (0.1, 4.0, 2.0),
        (0.3, 2.0, 8.0),
        (0.6, 1.35, 30.0),
        (0.6, 1.6, 30.0),
    ]
}

STIFF: dict[str, Loop] = {
    "a filter a million times faster than the plant": (
        first_order(1.0, 100.0, 2.0),
        ideal(8.0, 60.0, 1.0, 1e-4),
    ),
    "lags six decades apart": (lags(2.0, [1e3, 1.0, 1e-3], dead_time_s=0.5), ideal(3.0, 200.0)),
    "a measurement filter slower than the plant": (
        first_order(1.0, 1.0, 0.3),
        ideal(0.9, 6.0, measurement_filter_s=7.0),
    ),
    "six equal lags": (lags(1.5, [2.0] * 6), ideal(0.6, 9.0)),
    "equal lags multiplied out": (ratio([1.0], [1.0, 4.0, 6.0, 4.0, 1.0], 0.7), ideal(0.8, 3.0, 0.9, 0.09)),
    "an inverse response faster than its dead time": (
        lags(1.0, [5.0, 3.0], zeros_s=[-0.2], dead_time_s=1.0),
        series(1.2, 5.0, 2.0, 0.2),
    ),
    "an inverse response slower than anything else": (
        lags(1.0, [2.0, 1.0], zeros_s=[-9.0], dead_time_s=0.5),
        ideal(0.06, 2.0),
    ),
    "integral action a thousand times slower than the loop": (first_order(1.0, 1.0, 0.2), ideal(2.0, 2e3)),
}

DEAD_TIMES: dict[str, Loop] = {
    "a dead time of a millionth of the lag": (first_order(2.0, 10.0, 1e-5), ideal(3.0, 8.0)),
    "a dead time of a thousandth of the lag": (first_order(2.0, 10.0, 1e-2), ideal(300.0, 2.0)),
    "a dead time of a thousand lags": (first_order(1.0, 1.0, 1e3), ideal(0.2, 350.0)),
    "dead time alone under integral action": (ratio([2.0], [1.0], 3.0), ideal(None, 11.0)),
    "dead time alone under PI": (ratio([2.0], [1.0], 3.0), ideal(0.15, 2.0)),
}

NEUTRAL: dict[str, Loop] = {
    # proper plants that do not roll off: abs L(∞) below 1
    "abs L(∞) 0.3": (ratio([0.6, 1.0], [2.0, 1.0], 1.0), ideal(1.0, 4.0)),
    "abs L(∞) 0.3, fast integral action": (ratio([0.6, 1.0], [2.0, 1.0], 1.0), ideal(1.0, 0.4)),
    "abs L(∞) 0.9": (ratio([1.8, 1.0], [2.0, 1.0], 0.4), ideal(1.0, 60.0)),
    "abs L(∞) 0.5 by an unfiltered derivative": (first_order(1.0, 4.0, 0.5), ideal(1.0, 4.0, 2.0)),
    "abs L(∞) 0.5 with a lead that turns back": (ratio([-1.0, 1.0], [2.0, 1.0], 0.3), ideal(1.0, 9.0)),
}

FORMS: dict[str, Loop] = {
    "series with a filter between its times": (first_order(1.0, 5.0, 1.0), series(1.3, 4.0, 0.6, 2.0)),
    "parallel with a strong derivative": (integrating(0.1, 2.0, 0.5), parallel(2.0, 0.02, 6.0, 0.2)),
    "complex zeros on a resonance": (
        resonant(1.0, 2.0, 0.05, 0.2),
        two_zeros(0.3, tuple(pair(-0.12, 1.9)), 0.05),
    ),
    "direct action on a falling plant": (
        first_order(-1.0, 5.0, 1.0),
        ideal(2.0, 5.0, 0.4, 0.05, action="direct"),
    ),
}

STABLE = {
    **LIGHT_RESONANCES,
    **SEVERAL_CROSSOVERS,
    **CONDITIONALLY_STABLE,
    **UNSTABLE_LAGS,
    **STIFF,
    **DEAD_TIMES,
    **NEUTRAL,
    **FORMS,
}

UNSTABLE: dict[str, Loop] = {
    **UNSTABLE_RESONANCES,
    "a resonance and a notch that swap places": (
        factors(0.6, pair(-0.02, 1.5), [*pair(-0.01, 1.0), *pair(-0.02, 3.0), -0.5], 0.3),
        ideal(0.4, 6.0),
    ),
    "double integrator with too little gain": (
        factors(1.0, [], [0.0, 0.0], 0.05),
        ideal(0.08, 8.0, 1.5, 0.05),
    ),
    "an unstable lag with too little gain": (first_order(-1.0, -10.0, 3.0), ideal(1.02, 80.0)),
    "an unstable lag with too much gain": (first_order(-1.0, -10.0, 3.0), ideal(4.6, 80.0)),
    "an unstable lag with a dead time longer than it": (first_order(-1.0, -10.0, 11.0), ideal(1.1, 1e3)),
    "many roots right of the axis": (first_order(1.0, 1.0, 10.0), ideal(40.0, 10.0)),
    "a dead time of a thousand lags, gain above 1": (first_order(1.0, 1.0, 1e3), ideal(1.02, 350.0)),
    "abs L(∞) 0.5, integral action too fast": (ratio([1.0, 1.0], [2.0, 1.0], 1.0), ideal(1.0, 0.3)),
    "integral and derivative action without a proportional term": (
        integrating(0.1, 2.0, 0.5),
        parallel(0.0, 0.02, 3.0, 0.2),
    ),
    "a controller zero right of the axis": (first_order(1.0, 5.0, 1.0), two_zeros(0.4, (0.3, -0.2), 0.2)),
    "reverse action on a falling plant": (first_order(-1.0, 5.0, 1.0), ideal(2.0, 5.0, 0.4, 0.05)),
}

HARD = {**STABLE, **UNSTABLE}


@cache
def recomputed(name: str) -> Recomputation:
    return recompute(*HARD[name])


@cache
def exact(name: str) -> ExactLoop:
    return exact_loop(*HARD[name])


@cache
def winding(name: str) -> int:
    return roots_right_of(exact(name))


@cache
def dense_search(name: str) -> ReferenceMargins:
    return reference_margins(exact(name))


@cache
def rightmost(name: str) -> Any:
    return rightmost_root(exact(name))


@pytest.mark.parametrize("name", HARD)
def test_the_verdict_and_the_root_count_are_those_of_the_winding(name: str) -> None:
    stability, count = recomputed(name).continuous.stability, winding(name)
    assert recomputed(name).verdict == stability.verdict == ("unstable" if count else "stable")
    assert [route.unstable_roots for route in stability.routes] == [count] * len(stability.routes)


@pytest.mark.parametrize("name", STABLE)
def test_the_loops_that_are_meant_to_be_stable_are(name: str) -> None:
    # by the reference: the tests below look at margins and responses, which only a stable loop has
    assert winding(name) == 0


@pytest.mark.parametrize("name", STABLE)
def test_the_margins_are_those_of_a_dense_search(name: str) -> None:
    margins, reference = recomputed(name).continuous.margins, dense_search(name)
    assert margins is not None
    for field, expected in [
        ("gain_margin", reference.gain_margin),
        ("gain_reduction_margin", reference.gain_reduction_margin),
        ("phase_margin_deg", reference.phase_margin_deg),
        ("delay_margin_s", reference.delay_margin),
        ("max_sensitivity", reference.max_sensitivity),
        ("max_complementary_sensitivity", reference.max_complementary_sensitivity),
        ("disk_margin", reference.disk_margin),
    ]:
        truth = "unbounded" if expected is None else pytest.approx(float(expected), rel=1e-9, abs=0.0)
        assert getattr(margins, field) == truth, field


@pytest.mark.parametrize("name", STABLE)
def test_no_gain_crossover_is_missing(name: str) -> None:
    found = recomputed(name).continuous.crossovers.gain_crossovers
    reference = dense_search(name)
    assert [crossover.rad_s for crossover in found] == [
        pytest.approx(float(rad_s), rel=1e-9, abs=0.0) for rad_s in reference.gain_crossovers
    ]
    assert [crossover.phase_margin_deg for crossover in found] == [
        pytest.approx(float(phase), rel=1e-8, abs=1e-9) for phase in reference.phase_margins_deg
    ]


@pytest.mark.parametrize("name", SEVERAL_CROSSOVERS)
def test_the_loops_of_several_crossovers_have_them(name: str) -> None:
    count = {"five": 5, "seven": 7}.get(name.split()[0], 1)
    assert len(dense_search(name).gain_crossovers) == count


@pytest.mark.parametrize("name", HARD)
def test_the_decay_rate_is_that_of_the_rightmost_root(name: str) -> None:
    decay_rate = recomputed(name).continuous.stability.decay_rate_per_s
    assert decay_rate == pytest.approx(-float(rightmost(name).real), rel=1e-7, abs=0.0)


def test_the_chain_of_roots_of_a_neutral_loop_bounds_the_decay_rate() -> None:
    # abs L rises to 0.9 from below: every root lies left of ln 0.9/θ, and the chain of them comes as near to
    # that line as one likes
    loop = ratio([1.8, 0.5], [2.0, 1.0], 4.0), ideal(1.0)
    decay_rate = recompute(*loop).continuous.stability.decay_rate_per_s
    assert decay_rate == pytest.approx(-math.log(0.9) / 4.0, rel=1e-12)
    assert roots_right_of(exact_loop(*loop), -0.999 * decay_rate) == 0


MARCHED = [
    *list(LIGHT_RESONANCES)[:6],
    "double integrator under PID",
    "two unstable lags",
    "unstable lag with dead time 0.3 of it",
    "unstable lag with dead time 0.6 of it",
    "six equal lags",
    "equal lags multiplied out",
    "a measurement filter slower than the plant",
    "an inverse response faster than its dead time",
    "an inverse response slower than anything else",
    "dead time alone under integral action",
    "dead time alone under PI",
    "abs L(∞) 0.3",
    "abs L(∞) 0.3, fast integral action",
    "abs L(∞) 0.5 with a lead that turns back",
    "series with a filter between its times",
    "parallel with a strong derivative",
    "complex zeros on a resonance",
    "direct action on a falling plant",
]


def marched(name: str, *, load: bool) -> Marched:
    # e^-22: what is left of the integrals is below the tolerance
    return march(exact(name), 22.0 / -float(rightmost(name).real), load=load)


@pytest.mark.parametrize("name", MARCHED)
def test_the_setpoint_step_is_the_marched_one(name: str) -> None:
    step = recomputed(name).continuous.setpoint_step
    assert step is not None
    reference = setpoint_measures(marched(name, load=False), 1.0)
    assert step.final_value == pytest.approx(1.0, rel=1e-12)
    assert step.rise_time_s == pytest.approx(reference.rise_time, rel=1e-6, abs=0.0)
    if not step.settling_time_sensitive:
        assert step.settling_time_s == pytest.approx(reference.settling_time, rel=1e-6, abs=0.0)
    assert step.overshoot_percent == pytest.approx(reference.overshoot_percent, rel=0.0, abs=1e-5)
    assert step.undershoot_percent == pytest.approx(reference.undershoot_percent, rel=0.0, abs=1e-5)
    if step.overshoot_percent:
        assert step.peak_time_s == pytest.approx(reference.peak_time, rel=1e-6, abs=0.0)
    assert step.iae == pytest.approx(reference.iae, rel=1e-4, abs=0.0)
    assert step.ise == pytest.approx(reference.ise, rel=1e-4, abs=0.0)
    assert step.itae == pytest.approx(reference.itae, rel=1e-4, abs=0.0)
    assert step.output_peak == pytest.approx(reference.output_peak, rel=1e-6, abs=0.0)
    assert step.output_total_variation == pytest.approx(reference.output_total_variation, rel=1e-4, abs=0.0)


@pytest.mark.parametrize("name", MARCHED)
def test_the_load_step_is_the_marched_one(name: str) -> None:
    step = recomputed(name).continuous.load_step
    assert step is not None
    reference = load_measures(marched(name, load=True), 0.0)
    assert step.final_value == pytest.approx(0.0, abs=1e-12)
    assert step.peak_deviation == pytest.approx(reference.peak_deviation, rel=1e-6, abs=0.0)
    assert step.peak_time_s == pytest.approx(reference.peak_time, rel=1e-6, abs=0.0)
    assert step.recovery_time_s == pytest.approx(reference.recovery_time, rel=1e-6, abs=0.0)
    assert step.iae == pytest.approx(reference.iae, rel=1e-4, abs=0.0)
    assert step.integrated_error == pytest.approx(reference.integrated_error, rel=1e-4, abs=0.0)
