"""Zeros in brackets against functions whose zeros are known in closed form."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from service.analysis.brackets import newton_zero, newton_zero_of_one, zero_between, zeros_in_steps
from service.analysis.loop import OpenLoop

FUNCTIONS = {
    "a line": (lambda x: x - 0.3, 0.3),
    "an exponential that falls": (lambda x: math.exp(-x) - 0.5, math.log(2.0)),
    "a steep S-curve": (lambda x: math.atan(1e6 * (x - 0.123456789)), 0.123456789),
    "a cube, flat at its zero": (lambda x: (x - 0.7) ** 3, 0.7),
    "a step": (lambda x: math.copysign(1.0, x - 1 / 3), 1 / 3),
}


@pytest.mark.parametrize("name", FUNCTIONS)
def test_a_single_zero_is_met_to_float64(name: str) -> None:
    function, zero = FUNCTIONS[name]
    met = zero_between(function, 0.0, 1.0, function(0.0), function(1.0))
    # where the function is flat its own rounding is met first
    assert met == pytest.approx(zero, rel=1e-15 if "flat" not in name else 1e-5)


def test_a_loose_tolerance_is_kept_and_costs_less() -> None:
    calls = []

    def function(x: float) -> float:
        calls.append(x)
        return math.exp(-x) - 0.5

    assert zero_between(function, 0.0, 4.0, 0.5, math.exp(-4.0) - 0.5, 1e-3) == pytest.approx(
        math.log(2), rel=1e-3
    )
    loose = len(calls)
    zero_between(function, 0.0, 4.0, 0.5, math.exp(-4.0) - 0.5)
    assert loose < len(calls) - loose


@pytest.mark.parametrize("name", [name for name in FUNCTIONS if "step" not in name])
@pytest.mark.parametrize("start", [0.05, 0.95, math.nan])
def test_newton_for_one_meets_the_zero_from_anywhere(name: str, start: float) -> None:
    function, zero = FUNCTIONS[name]

    def with_slope(x: float) -> tuple[float, float]:
        return function(x), (function(x + 1e-7) - function(x - 1e-7)) / 2e-7

    met = newton_zero_of_one(with_slope, 0.0, 1.0, function(0.0) > 0, start)
    assert met == pytest.approx(zero, rel=1e-12 if "flat" not in name else 1e-5)


def test_newton_for_one_halves_where_there_is_no_slope() -> None:
    met = newton_zero_of_one(lambda x: (math.copysign(1.0, x - 1 / 3), 0.0), 0.0, 1.0, False, 0.5)
    assert met == pytest.approx(1 / 3, rel=1e-15)


def test_each_step_of_a_grid_has_its_own_zero() -> None:
    grid = np.linspace(0.5, 9.5, 10)
    values = np.sin(math.pi * grid / 1.5)
    steps = np.flatnonzero(np.sign(values[:-1]) != np.sign(values[1:]))
    met = zeros_in_steps(lambda x: math.sin(math.pi * x / 1.5), grid, values, steps)
    assert met == pytest.approx([1.5, 3.0, 4.5, 6.0, 7.5, 9.0], rel=1e-14)


def test_no_step_has_no_zero() -> None:
    grid = np.array([1.0, 2.0])
    assert zeros_in_steps(math.sin, grid, np.sin(grid), np.array([], np.intp)).shape == (0,)


def test_newton_that_begins_on_a_zero_where_all_is_flat_stays_there() -> None:
    """The first turning point of a response behind its dead time: value and slope are 0 at once."""

    def cubes(at: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return at**3, 3.0 * at**2

    low, high = np.array([0.0, -1.0]), np.array([1.0, 2.0])
    met = newton_zero(cubes, low, high, low**3 - 1e-300, 1.0, start=np.array([0.0, 0.5]))
    assert met[0] == 0.0
    # towards a triple zero Newton's steps shrink by a third each, so the last of them is about the error
    assert abs(met[1]) <= 1e-8


@given(
    omega=st.floats(1e-6, 1e6),
    dead_time=st.floats(0.0, 10.0),
    all_pass=st.integers(0, 40),
    real=st.floats(-100.0, 100.0).filter(lambda value: abs(value) > 1e-3),
    pair=st.complex_numbers(min_magnitude=1e-3, max_magnitude=1e3, allow_nan=False),
)
def test_one_frequency_and_many_are_the_same_loop(
    omega: float, dead_time: float, all_pass: int, real: float, pair: complex
) -> None:
    # upon a pole neither has a value, and beside it rounding is the larger part
    assume(min(abs(1j * omega - pair), abs(1j * omega - pair.conjugate())) > 1e-3 * abs(pair))
    loop = OpenLoop(
        zeros=np.array([real + 0j]),
        poles=np.array([0j, pair, pair.conjugate()]),
        log_gain=0.3,
        sign=-1.0,
        dead_time=dead_time,
        all_pass=all_pass,
    )
    (logs,), (slopes,) = loop.on_axis(np.array([omega]))
    log, slope = loop.at_frequency(omega)
    assert log == pytest.approx(complex(logs), rel=1e-12, abs=1e-12)
    assert slope == pytest.approx(complex(slopes), rel=1e-12, abs=1e-12)
    # the two parts one by one, in real numbers
    assert loop.log_magnitude_at(omega) == pytest.approx((log.real, slope.real), rel=1e-11, abs=1e-11)
    assert loop.phase_at(omega) == pytest.approx((log.imag, slope.imag), rel=1e-11, abs=1e-11)


def test_upon_a_pole_the_magnitude_is_infinite_and_the_rest_is_not_a_number() -> None:
    loop = OpenLoop(np.array([2j, -2j]), np.array([0j, 1j, -1j]), 0.0, 1.0, dead_time=1.0)
    for omega, magnitude in ((1.0, math.inf), (2.0, -math.inf)):
        log, slope = loop.log_magnitude_at(omega)
        assert log == magnitude == loop.at_frequency(omega)[0].real
        assert math.isnan(slope)
        assert all(math.isnan(value) for value in loop.phase_at(omega))
