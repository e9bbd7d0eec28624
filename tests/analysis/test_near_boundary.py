"""Loops scaled to their own stability limit: decided and right at 1e-6 of it, never wrong at 1e-9.

The limits are found by the references at fifty digits, or stand in the check file of fifty digits; which side
is the stable one, and how many roots cross, the winding count says. Much nearer than 1e-9 float64 cannot tell
a loop from its limit: there `undecided` is an honest answer, the wrong verdict is not.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from typing import Any

import pytest
from mpmath import mpf

from service.analysis.controller import Controller
from service.analysis.plant import (
    FirstOrder,
    Integrating,
    PlantModel,
    SecondOrder,
    TransferFunction,
    ZerosPolesGain,
)
from service.analysis.recomputation import recompute
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
from tests.checks.loops import read
from tests.references.margins import reference_margins
from tests.references.told import exact_loop
from tests.references.winding import roots_right_of

NEAR, NEARER = 1e-6, 1e-9

Loop = tuple[PlantModel, Controller]


def pair(real: float, imag: float) -> list[tuple[float, float]]:
    return [(real, imag), (real, -imag)]


LOOPS: dict[str, Loop] = {
    "lag": (first_order(2.0, 5.0, 1.0), ideal(1.0, 4.0)),
    "lag under a short dead time": (first_order(2.0, 50.0, 0.01), ideal(20.0, 8.0)),
    "lag under a long dead time": (first_order(1.0, 1.0, 40.0), ideal(0.3, 12.0)),
    "dead time alone": (ratio([2.0], [1.0], 3.0), ideal(None, 11.0)),
    "two lags": (lags(1.5, [9.0, 2.0], dead_time_s=1.0), series(2.0, 9.0, 2.0, 0.2)),
    "three lags without dead time": (lags(1.0, [5.0, 2.0, 1.0]), ideal(3.0)),
    "eight equal lags": (lags(1.0, [2.0] * 8), ideal(0.7, 9.0)),
    "stiff lags": (lags(2.0, [1e3, 1.0, 1e-3], dead_time_s=0.5), ideal(3.0, 200.0)),
    "integrating": (integrating(0.2, 3.0, 1.0), ideal(0.6, 40.0, 2.0, 0.2)),
    "inverse response": (lags(1.0, [5.0, 3.0], zeros_s=[-4.0], dead_time_s=0.5), ideal(0.5, 6.0)),
    "light resonance": (resonant(0.02, 1.0, 0.01, 11.0), ideal(0.9, 0.5)),
    "lighter resonance under a longer dead time": (resonant(0.002, 1.0, 0.001, 98.5), ideal(0.6, 0.5)),
    "seven gain crossovers": (
        factors(
            4.5,
            [*pair(-0.02, 1.5), *pair(-0.04, 3.1)],
            [*pair(-0.01, 1.0), *pair(-0.02, 2.2), *pair(-0.04, 4.5)],
            0.1,
        ),
        ideal(0.8, 9.0, 0.3, 0.01),
    ),
    "double integrator": (factors(1.0, [], [0.0, 0.0], 0.05), ideal(2.0, 8.0, 1.5, 0.05)),
    "triple integrator under two zeros": (
        factors(4.0, [-0.5, -0.7], [0.0, 0.0, -30.0, -40.0], 0.002),
        ideal(60.0, 20.0),
    ),
    "unstable lag": (first_order(-1.0, -10.0, 3.0), ideal(2.0, 80.0)),
    "unstable lag that needs all of its gain at rest": (first_order(-1.0, -10.0, 2.0), ideal(2.0)),
    "two unstable lags": (factors(1.0, [-0.8], [0.2, 0.3, -9.0], 0.05), ideal(12.0, 9.0, 0.6, 0.06)),
    "unstable pair": (factors(1.2, [-0.6], [*pair(0.1, 1.0), -12.0], 0.03), ideal(30.0, 6.0, 0.2, 0.02)),
    "does not roll off, limit at a finite frequency": (
        ratio([0.6, 1.0], [2.0, 1.0], 1.0),
        ideal(1.0, 0.4),
    ),
    "parallel": (integrating(0.1, 2.0, 0.5), parallel(2.0, 0.02, 6.0, 0.2)),
    "complex zeros of the controller": (
        resonant(1.0, 2.0, 0.05, 0.2),
        two_zeros(0.3, tuple(pair(-0.12, 1.9)), 0.05),
    ),
    "slow measurement filter": (first_order(1.0, 1.0, 0.3), ideal(0.9, 6.0, measurement_filter_s=7.0)),
    "falling plant under direct action": (first_order(-2.0, 5.0, 1.0), ideal(1.0, 4.0, action="direct")),
}

NEUTRAL: dict[str, Loop] = {
    "direct term": (ratio([1.8, 0.5], [2.0, 1.0], 0.7), ideal(0.5)),
    "unfiltered derivative": (first_order(1.0, 4.0, 0.5), ideal(1.0, 4.0, 2.0)),
}
"""abs L rises to abs L(∞): the gain limit lies at infinite frequency, where infinitely many roots cross."""


@dataclass(frozen=True)
class Limit:
    """Where a quantity brings roots onto the axis, and from which side: +1, a larger one destabilises."""

    loop: Loop
    quantity: str
    at: Any
    side: int

    def scaled(self, relative: float) -> Loop:
        """The loop at its limit·(1 + side·relative): beyond it where `relative` is above 0."""
        plant, controller = self.loop
        value = self.at * (1 + self.side * mpf(relative))
        if self.quantity == "dead time":
            return replace(plant, dead_time_s=float(value)), controller
        return with_gain(plant, value), controller


def with_gain(plant: PlantModel, factor: Any) -> PlantModel:
    """The plant with its gain multiplied, rounded once."""
    match plant:
        case FirstOrder() | SecondOrder() | ZerosPolesGain():
            return replace(plant, gain=float(plant.gain * factor))
        case Integrating():
            return replace(plant, gain_per_s=float(plant.gain_per_s * factor))
        case TransferFunction():
            return replace(plant, numerator=tuple(float(c * factor) for c in plant.numerator))
    raise TypeError(plant)


@cache
def limits_of(name: str) -> dict[str, Limit]:
    """Every limit of one of LOOPS, by the references."""
    loop = LOOPS[name]
    margins = reference_margins(exact_loop(*loop))
    found = {}
    if margins.gain_margin is not None:
        found["gain from above"] = Limit(loop, "gain", margins.gain_margin, 1)
    if margins.gain_reduction_margin is not None:
        found["gain from below"] = Limit(loop, "gain", margins.gain_reduction_margin, -1)
    if margins.delay_margin is not None:
        found["dead time"] = Limit(loop, "dead time", loop[0].dead_time_s + margins.delay_margin, 1)
    return found


@cache
def limit(name: str, which: str) -> Limit:
    return limits_of(name)[which]


GAIN_FROM_BELOW = [
    "double integrator",
    "triple integrator under two zeros",
    "unstable lag",
    "unstable lag that needs all of its gain at rest",
    "two unstable lags",
    "unstable pair",
]

EVERY_LIMIT = [
    *((name, "gain from above") for name in LOOPS),
    *((name, "gain from below") for name in GAIN_FROM_BELOW),
    *((name, "dead time") for name in LOOPS),
]


@pytest.mark.parametrize("name", LOOPS)
def test_no_limit_of_a_loop_is_left_out(name: str) -> None:
    assert {which for loop, which in EVERY_LIMIT if loop == name} == set(limits_of(name))


@pytest.mark.parametrize(("name", "which"), EVERY_LIMIT)
def test_a_millionth_inside_its_limit_a_loop_is_stable(name: str, which: str) -> None:
    inside = limit(name, which).scaled(-NEAR)
    assert roots_right_of(exact_loop(*inside)) == 0
    assert_decided(inside, 0)


@pytest.mark.parametrize(("name", "which"), EVERY_LIMIT)
def test_a_millionth_beyond_its_limit_a_loop_is_unstable_by_the_roots_that_crossed(
    name: str, which: str
) -> None:
    beyond = limit(name, which).scaled(NEAR)
    crossed = roots_right_of(exact_loop(*beyond))
    assert crossed in (1, 2)
    assert_decided(beyond, crossed)


@pytest.mark.parametrize(("name", "which"), EVERY_LIMIT)
def test_a_billionth_from_its_limit_no_verdict_is_wrong(name: str, which: str) -> None:
    assert recompute(*limit(name, which).scaled(-NEARER)).verdict in ("stable", "undecided")
    assert recompute(*limit(name, which).scaled(NEARER)).verdict in ("unstable", "undecided")


@pytest.mark.parametrize(("name", "which"), EVERY_LIMIT)
def test_at_its_limit_to_the_last_bit_a_loop_is_undecided(name: str, which: str) -> None:
    at_limit = recompute(*limit(name, which).scaled(0.0)).continuous
    assert at_limit.stability.verdict == "undecided"
    assert at_limit.stability.reason
    assert at_limit.margins is None


@pytest.mark.parametrize("relative", [-NEAR, -NEARER])
@pytest.mark.parametrize("name", NEUTRAL)
def test_just_below_a_gain_of_1_at_infinite_frequency_a_neutral_loop_is_stable(
    name: str, relative: float
) -> None:
    assert_decided(neutral_limit(name).scaled(relative), 0)


@pytest.mark.parametrize("relative", [NEAR, NEARER])
@pytest.mark.parametrize("name", NEUTRAL)
def test_just_above_a_gain_of_1_at_infinite_frequency_a_neutral_loop_is_unstable(
    name: str, relative: float
) -> None:
    assert_decided(neutral_limit(name).scaled(relative), "unbounded")


def neutral_limit(name: str) -> Limit:
    exact = exact_loop(*NEUTRAL[name])
    return Limit(NEUTRAL[name], "gain", abs(exact.denominator[0] / exact.numerator[0]), 1)


FIFTY_DIGITS = {loop.name: loop for loop in read("fifty_digits.json") if loop.expected["stable"]}

OF_THE_FILE = [
    (name, field)
    for name, loop in FIFTY_DIGITS.items()
    for field in ("gain_margin", "gain_reduction_margin", "delay_margin_s")
    if loop.expected[field] is not None
]


def limit_of_the_file(name: str, field: str) -> Limit:
    check = FIFTY_DIGITS[name]
    plant, value = check.plant_model(), mpf(check.expected[field])
    if field == "delay_margin_s":
        return Limit((plant, check.controller()), "dead time", plant.dead_time_s + value, 1)
    return Limit((plant, check.controller()), "gain", value, 1 if field == "gain_margin" else -1)


@pytest.mark.parametrize(("name", "field"), OF_THE_FILE)
def test_the_loops_of_fifty_digits_are_right_at_a_millionth_of_each_of_their_limits(
    name: str, field: str
) -> None:
    edge = limit_of_the_file(name, field)
    assert recompute(*edge.scaled(-NEAR)).verdict == "stable"
    assert recompute(*edge.scaled(NEAR)).verdict == "unstable"


@pytest.mark.parametrize(("name", "field"), OF_THE_FILE)
def test_the_loops_of_fifty_digits_are_not_wrong_at_a_billionth_of_each_of_their_limits(
    name: str, field: str
) -> None:
    edge = limit_of_the_file(name, field)
    assert recompute(*edge.scaled(-NEARER)).verdict in ("stable", "undecided")
    assert recompute(*edge.scaled(NEARER)).verdict in ("unstable", "undecided")


def assert_decided(loop: Loop, unstable_roots: int | str) -> None:
    stability = recompute(*loop).continuous.stability
    assert stability.verdict == ("unstable" if unstable_roots else "stable")
    assert [route.unstable_roots for route in stability.routes] == [unstable_roots] * len(stability.routes)
