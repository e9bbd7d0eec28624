"""Zeros in brackets, many at once: arrays in, arrays out, each element to its own root."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from service.analysis.loop import Reals

MAX_STEPS = 200

NEWTON_DONE = 1e-12
"""A Newton step this small, relatively, leaves an error of its square, which is below float64."""


def newton_zero(
    function: Callable[[Reals], tuple[Reals, Reals]],
    low: Reals,
    high: Reals,
    value_low: Reals,
    resolution: float = 0.0,
) -> Reals:
    """A zero in each bracket to float64: Newton where it contracts, halving where it does not.

    `function` gives value and slope, arrays of the brackets' shape; `value_low` is its value at `low`. The
    function changes sign once in each bracket. Places below `resolution` are as good as 0.
    """
    above = value_low > 0
    at, previous = 0.5 * (low + high), high - low
    for _ in range(MAX_STEPS):
        value, slope = function(at)
        before = (value > 0) == above
        low, high = np.where(before, at, low), np.where(before, high, at)
        step = value / slope
        newton = at - step
        size = np.abs(step)
        taken = (size <= 0.5 * previous) & (newton >= low) & (newton <= high)
        about = np.maximum(np.abs(at), resolution)
        arrived = size <= NEWTON_DONE * about
        settled = arrived | (high - low <= 4e-16 * about)
        stay = np.where(arrived, np.clip(newton, low, high), at)
        at = np.where(taken, newton, np.where(settled, stay, 0.5 * (low + high)))
        if settled.all():
            break
        previous = np.where(taken, size, 0.5 * (high - low))
    return at


def falling_zero(function: Callable[[Reals], Reals], low: Reals, high: Reals, tolerance: float) -> Reals:
    """Where a function falls through 0 between `low` and `high`, to `tolerance` relative to the place.

    Chandrupatla's method: inverse quadratic interpolation where its points allow it, else halving.
    T. R. Chandrupatla, A new hybrid quadratic/bisection algorithm for finding the zero of a nonlinear
    function without using derivatives, Advances in Engineering Software 28 (1997) 145-149.
    """
    a, b = high, low
    at_a, at_b = function(a), function(b)
    share = np.full_like(a, 0.5)
    best = a
    for _ in range(MAX_STEPS):
        x = a + share * (b - a)
        value = function(x)
        same = (value > 0) == (at_a > 0)
        c, at_c = np.where(same, a, b), np.where(same, at_a, at_b)
        b, at_b = np.where(same, b, a), np.where(same, at_b, at_a)
        a, at_a = x, value
        best = np.where(np.abs(at_a) < np.abs(at_b), a, b)
        width = np.abs(b - a)
        least = tolerance * np.abs(best) / np.maximum(width, 1e-300)
        if np.all((least > 0.5) | (value == 0)):
            break
        span, rise = (a - b) / (c - b), (at_a - at_b) / (at_c - at_b)
        quadratic = (rise * rise < span) & ((1 - rise) * (1 - rise) < 1 - span)
        with np.errstate(all="ignore"):
            interpolated = at_a / (at_b - at_a) * at_c / (at_b - at_c) + (c - a) / (b - a) * at_a / (
                at_c - at_a
            ) * at_b / (at_c - at_b)
        share = np.where(quadratic, interpolated, 0.5)
        share = np.clip(np.nan_to_num(share, nan=0.5), np.minimum(least, 0.5), np.maximum(1 - least, 0.5))
    return best
