"""How many characteristic roots lie right of a line, by the turning of the characteristic function along it.

F(s) = D(s) + N(s)·e^(−sθ) is entire. Along s = σ + jω, ω from 0 to infinity, its argument turns by
n·π/2 − m·π for n the degree of D and m roots right of the line (Mikhailov 1938; with dead time Pontryagin
1942). The line is walked on a dense grid; a step that turns by more than a quarter of a right angle is halved
at fifty digits until it does not, so that a root near the line cannot be stepped over.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from mpmath import mp, mpc, mpf

from tests.references.told import ExactLoop, polynomial_roots

QUARTER_RIGHT_ANGLE = 0.39
POINTS_A_DECADE = 200
POINTS_A_DEAD_TIME_TURN = 24
MOST_POINTS = 60_000
SMALLEST_STEP = mpf(10) ** -40
"""Relative to the frequency; a root nearer to the line than this is on it."""


class OnTheLineError(ValueError):
    """A root lies on the line, as near as fifty digits can say."""


def roots_right_of(loop: ExactLoop, line: Any = 0) -> int:
    """The number of characteristic roots with real part above `line`, with multiplicity.

    For loops that roll off, or whose abs L(∞) is below 1 on the line; ValueError where it is not. Of a loop
    without dead time that does not roll off the roots of the characteristic polynomial are counted.
    """
    line = mpf(line)
    if loop.dead_time == 0 and len(loop.numerator) >= len(loop.denominator):
        return _roots_of_polynomial_right_of(loop, line)
    if len(loop.numerator) > len(loop.denominator) and loop.dead_time > 0:
        raise ValueError("abs L grows without bound")
    top = _highest_frequency(loop, line)
    grid = _grid(loop, top)
    values = [loop.characteristic(mpc(line, omega)) for omega in grid]
    turn = mpf(0)
    for index in range(len(grid) - 1):
        turn += _turn(loop, line, grid[index], grid[index + 1], values[index], values[index + 1])
    degree = len(loop.denominator) - 1
    # beyond the top F is D·(1+L) with abs L < 1: what is left of the turn is D's and the argument of 1+L
    rest = _rest_of_denominator(loop, line, top) - mp.arg(1 + loop.at(mpc(line, top)))
    count = mpf(degree) / 2 - (turn + rest) / mp.pi
    nearest = int(mp.nint(count))
    if abs(count - nearest) > 1e-6:
        raise ValueError(f"the turn gives {mp.nstr(count, 10)} roots")
    return nearest


def _roots_of_polynomial_right_of(loop: ExactLoop, line: Any) -> int:
    short = len(loop.numerator) - len(loop.denominator)
    denominator = [mpf(0)] * short + loop.denominator
    total = [n + d for n, d in zip(loop.numerator, denominator, strict=True)]
    distances = [root.real - line for root in polynomial_roots(total)]
    if any(abs(distance) < SMALLEST_STEP for distance in distances):
        raise OnTheLineError("a root lies on the line")
    return sum(distance > 0 for distance in distances)


def _rest_of_denominator(loop: ExactLoop, line: Any, top: Any) -> Any:
    """How much the argument of D still turns from the top frequency to infinity."""
    rest = mpf(0)
    for root in polynomial_roots(loop.denominator):
        rest += mp.pi / 2 - mp.arg(mpc(line, top) - root)
    return rest


def _highest_frequency(loop: ExactLoop, line: Any) -> Any:
    """A frequency above every light resonance, beyond which abs L stays below 1 on the line."""
    roots = [
        root for root in polynomial_roots(loop.denominator) + polynomial_roots(loop.numerator) if root != 0
    ]
    paces = [abs(root) for root in roots] + ([1 / loop.dead_time] if loop.dead_time > 0 else [mpf(1)])
    light = [2 * abs(root) for root in roots if abs(root.real - line) < abs(root.imag)]
    end = 4 * max(paces)
    while abs(loop.at(mpc(line, end))) >= mpf("0.3"):
        end *= 2
        if abs(loop.at(mpc(line, end))) > 0.999 * abs(loop.at(mpc(line, end / 2))):
            break
    if abs(loop.at(mpc(line, end))) > mpf("0.999999"):
        raise ValueError("abs L does not fall below 1 on the line")
    allowed = max(mpf("0.3"), (1 + abs(loop.at(mpc(line, end)))) / 2)
    walked = [mpf(float(omega)) for omega in np.geomspace(float(min(paces)) / 10, float(end), 600)]
    above = [index for index, omega in enumerate(walked) if abs(loop.at(mpc(line, omega))) >= allowed]
    top = walked[min(above[-1] + 10, 599)] if above else walked[0]
    return max([top, *light])


def _grid(loop: ExactLoop, top: Any) -> list[Any]:
    slowest = top
    for root in polynomial_roots(loop.denominator) + polynomial_roots(loop.numerator):
        if root != 0:
            slowest = min(slowest, abs(root))
    low = slowest * mpf("1e-4")
    decades = float(mp.log10(top / low))
    points = [0.0, *np.geomspace(float(low), float(top), int(POINTS_A_DECADE * decades) + 2)]
    if loop.dead_time > 0:
        turns = float(top * loop.dead_time) / (2 * np.pi)
        count = int(POINTS_A_DEAD_TIME_TURN * turns) + 2
        if count > MOST_POINTS:
            raise ValueError("too many turns of the dead time for this reference")
        points += list(np.linspace(0.0, float(top), count))
    points = sorted({*points, float(top)})
    return [mpf(point) for point in points[:-1]] + [top]


def _turn(loop: ExactLoop, line: Any, low: Any, high: Any, value_low: Any, value_high: Any) -> Any:
    if value_low == 0 or value_high == 0:
        raise OnTheLineError(f"a root at {mp.nstr(mpc(line, low if value_low == 0 else high), 15)}")
    turn = mp.arg(value_high / value_low)
    if abs(turn) < QUARTER_RIGHT_ANGLE:
        return turn
    if high - low < SMALLEST_STEP * high:
        raise OnTheLineError(f"a root at {mp.nstr(mpc(line, low), 15)}")
    middle = (low + high) / 2
    value = loop.characteristic(mpc(line, middle))
    below = _turn(loop, line, low, middle, value_low, value)
    return below + _turn(loop, line, middle, high, value, value_high)
