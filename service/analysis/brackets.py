"""Zeros in brackets: many at once, arrays in and arrays out, or one in plain numbers."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from service.analysis.loop import Reals

MAX_STEPS = 200

NEWTON_DONE = 1e-9
"""A Newton step this small, relatively, leaves an error of its square, which is below float64."""

FULL = 4e-16
"""A place to float64, relatively."""


@np.errstate(divide="ignore", invalid="ignore", over="ignore")
def newton_zero(
    function: Callable[[Reals], tuple[Reals, Reals]],
    low: Reals,
    high: Reals,
    value_low: Reals,
    resolution: float = 0.0,
    start: Reals | None = None,
) -> Reals:
    """A zero in each bracket to float64: Newton where it contracts, halving where it does not.

    `function` gives value and slope, arrays of the brackets' shape; `value_low` is its value at `low`. The
    function changes sign once in each bracket. Places below `resolution` are as good as 0.
    `start`: places to begin at, the middle where there are none.
    """
    above = value_low > 0
    at, previous = 0.5 * (low + high) if start is None else start, high - low
    for _ in range(MAX_STEPS):
        value, slope = function(at)
        before = (value > 0) == above
        low, high = np.where(before, at, low), np.where(before, high, at)
        step = np.where(value == 0, 0.0, value / slope)
        newton, size = at - step, np.abs(step)
        contracts = (size <= 0.5 * previous) & (newton >= low) & (newton <= high)
        about = np.maximum(np.abs(at), resolution)
        arrived = size <= NEWTON_DONE * about
        if contracts.all():
            at, previous = newton, size
            if arrived.all():
                break
            continue
        settled = arrived | (high - low <= FULL * about)
        stay = np.where(arrived, np.clip(newton, low, high), at)
        at = np.where(contracts, newton, np.where(settled, stay, 0.5 * (low + high)))
        if settled.all():
            break
        previous = np.where(contracts, size, 0.5 * (high - low))
    return at


def newton_zero_of_one(
    function: Callable[[float], tuple[float, float]], low: float, high: float, above: bool, start: float
) -> float:
    """`newton_zero` for one bracket, in plain numbers: a handful of zeros is found sooner so.

    `function` gives value and slope; `above` says whether it is above 0 at `low`. Begins at `start` if that
    lies inside.
    """
    at, previous = start if low <= start <= high else 0.5 * (low + high), high - low
    for _ in range(MAX_STEPS):
        value, slope = function(at)
        if value == 0:
            break
        low, high = (at, high) if (value > 0) == above else (low, at)
        newton = at - value / slope if slope else math.nan
        size = abs(newton - at)
        if low <= newton <= high and size <= 0.5 * previous:
            at, previous = newton, size
            if size <= NEWTON_DONE * abs(at):
                break
        elif high - low <= FULL * abs(at):
            break
        else:
            at, previous = 0.5 * (low + high), 0.5 * (high - low)
    return at


def zeros_in_steps(
    function: Callable[[float], float],
    grid: Reals,
    values: Reals,
    steps: npt.NDArray[np.intp],
    tolerance: float = FULL,
) -> Reals:
    """A zero in each of these steps of a grid, given by their left ends, shape (m,); `values` on the grid."""
    left, right = steps, steps + 1
    ends = zip(
        grid[left].tolist(), grid[right].tolist(), values[left].tolist(), values[right].tolist(), strict=True
    )
    return np.array([zero_between(function, *four, tolerance) for four in ends], np.float64)


def zero_between(
    function: Callable[[float], float],
    low: float,
    high: float,
    value_low: float,
    value_high: float,
    tolerance: float = FULL,
) -> float:
    """Where a function of one number passes 0 between `low` and `high`, to `tolerance` relative to the place.

    The values at both ends are given and differ in sign. One at a time: a handful of zeros is found sooner in
    plain numbers than in arrays.

    Chandrupatla's method: inverse quadratic interpolation where its points allow it, else halving.
    T. R. Chandrupatla, A new hybrid quadratic/bisection algorithm for finding the zero of a nonlinear
    function without using derivatives, Advances in Engineering Software 28 (1997) 145-149.
    """
    a, b, at_a, at_b = high, low, value_high, value_low
    secant = value_high / (value_high - value_low)
    share = secant if 0.0 < secant < 1.0 else 0.5
    for _ in range(MAX_STEPS):
        x = a + share * (b - a)
        value = function(x)
        if (value > 0) == (at_a > 0):
            c, at_c = a, at_a
        else:
            c, at_c, b, at_b = b, at_b, a, at_a
        a, at_a = x, value
        best = a if abs(at_a) < abs(at_b) else b
        least = tolerance * abs(best) / max(abs(b - a), 1e-300)
        if value == 0 or least > 0.5:
            return best
        share = _interpolated(a, b, c, at_a, at_b, at_c)
        share = min(max(share, least), 1.0 - least)
    return best


def _interpolated(a: float, b: float, c: float, at_a: float, at_b: float, at_c: float) -> float:
    """The share of the way from a to b where the inverse quadratic through three points is 0, or a half."""
    if at_c in (at_a, at_b) or c in (a, b) or at_a == at_b:
        return 0.5
    span, rise = (a - b) / (c - b), (at_a - at_b) / (at_c - at_b)
    if not (rise * rise < span and (1.0 - rise) * (1.0 - rise) < 1.0 - span):
        return 0.5
    share = at_a / (at_b - at_a) * at_c / (at_b - at_c)
    share += (c - a) / (b - a) * at_a / (at_c - at_a) * at_b / (at_c - at_b)
    return share if share == share else 0.5
