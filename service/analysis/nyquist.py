"""Route A: unstable roots of the closed loop counted by the argument principle on the axis (Nyquist).

The closed loop's characteristic function is D(s) + N(s)·e^(−sθ) = D(s)·(1 + L(s)). Its argument along the
axis is known without sampling: where abs L < 1 it is arg D + Arg(1 + L), where abs L > 1 it is arg N − ωθ +
Arg(1 + 1/L), both principal values being less than a quarter turn off. So it changes form at the gain
crossovers alone, and a complete list of those gives the exact count. Poles on the axis lie where abs L > 1
and need no indentation: their factors stand in the other form.

Source: the argument principle as used by Nyquist (Bell System Technical Journal 11, 1932) and, for
quasi-polynomials, by Mikhailov; see Stépán, Retarded Dynamical Systems (1989), section 2. From memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from service.analysis.frequency import AxisResponse, log_factors
from service.analysis.loop import EPSILON, Complexes, OpenLoop, Reals

ROUNDING_FACTOR = 64.0
"""How many times the rounding of one term the distance to -1 must exceed to be told from 0."""


MOST_ROOTS = 10**10
"""The angles of so many roots still add up to a whole number of turns within float64's rounding."""


@dataclass(frozen=True, slots=True)
class Count:
    """Roots right of the axis; None with the reason where float64 cannot tell."""

    roots: int | None
    infinitely_many: bool = False
    reason: str | None = None


def count_right_of_axis(axis: AxisResponse) -> Count:
    """Roots of 1 + L right of the axis, hidden ones not included."""
    loop = axis.loop
    if loop.sign == 0:
        return _count_poles(loop)
    neutral = _neutral(loop)
    if neutral is not None:
        return neutral
    if _touches_at_the_ends(loop):
        return Count(None, reason="a root lies on the axis within the precision of the numbers")
    crossovers = axis.gain_crossovers
    logs = loop.log_response(crossovers)
    distance = np.abs(1 + np.exp(1j * logs.imag))
    if np.any(distance < rounding(loop, crossovers)):
        return Count(None, reason="a root lies on the axis within the precision of the numbers")
    degree = len(loop.poles) if loop.dead_time > 0 else max(len(loop.poles), len(loop.zeros))
    degree += loop.all_pass
    if degree > MOST_ROOTS:
        return Count(None, reason="there are more roots than float64 can count by their angles")
    turned = _argument_change(axis, crossovers, logs.imag)
    roots = 0.5 * degree - turned / math.pi
    if not math.isfinite(roots):
        return Count(None, reason="the loop's numbers leave the range of float64")
    if abs(roots - round(roots)) > 1e-4 or round(roots) < 0:
        return Count(None, reason="the encirclements do not add up to a whole number")
    return Count(round(roots))


def rounding(loop: OpenLoop, omega: Reals) -> Reals:
    """How far rounding may move L(jω) relative to itself, shape of `omega`."""
    terms = (
        4.0 + len(loop.zeros) + len(loop.poles) + loop.all_pass + abs(loop.log_gain) + omega * loop.dead_time
    )
    return np.asarray(ROUNDING_FACTOR * EPSILON * terms)


def _count_poles(loop: OpenLoop) -> Count:
    on_axis = np.abs(loop.poles.real) <= ROUNDING_FACTOR * EPSILON * np.abs(loop.poles)
    if on_axis.any():
        return Count(None, reason="the loop is open and has a root on the axis")
    return Count(int(np.count_nonzero(loop.poles.real > 0)))


def _neutral(loop: OpenLoop) -> Count | None:
    """The answer where the loop does not roll off and has dead time and that alone decides."""
    if loop.dead_time == 0 or loop.excess > 0:
        return None
    magnitude = loop.high_frequency_magnitude
    if abs(magnitude - 1.0) <= ROUNDING_FACTOR * EPSILON * (4 + abs(loop.log_gain)):
        return Count(None, reason="the loop gain at high frequency is 1 within the precision of the numbers")
    if magnitude > 1.0:
        return Count(None, infinitely_many=True)
    return None


def _touches_at_the_ends(loop: OpenLoop) -> bool:
    tolerance = ROUNDING_FACTOR * EPSILON * (4 + len(loop.poles) + abs(loop.log_gain))
    if loop.order_at_origin == 0 and abs(1 + loop.origin_coefficient) < tolerance:
        return True
    if loop.dead_time == 0 and abs(1 + loop.value_at_infinity) < tolerance:
        return True
    return loop.order_at_origin < 0 and bool(np.any(loop.poles == 0))


def _argument_change(axis: AxisResponse, crossovers: Reals, phase: Reals) -> float:
    """Change of the characteristic function's argument from ω = 0 to ∞; `phase` of L at the crossovers."""
    loop = axis.loop
    forms = [_forms_at_origin(loop), *_forms(loop, crossovers, phase), _forms_at_infinity(loop)]
    total = 0.0
    for left, right, is_above in zip(forms[:-1], forms[1:], _above_one(axis, crossovers), strict=True):
        which = 1 if is_above else 0
        total += right[which] - left[which]
    return total


def _above_one(axis: AxisResponse, crossovers: Reals) -> list[bool]:
    """Whether abs L is above 1 in each stretch between crossovers, told by one frequency inside."""
    magnitude = axis.log_response.real
    first = [0, *np.searchsorted(axis.omega, crossovers, "right").tolist(), len(magnitude)]
    edges = [0.0, *crossovers.tolist(), math.inf]
    result = []
    for index, (begin, end) in enumerate(pairwise(first)):
        if begin < end:
            samples = magnitude[begin:end]
            result.append(bool(samples[np.abs(samples).argmax()] > 0))
        else:
            result.append(axis.loop.log_magnitude_at(0.5 * (edges[index] + edges[index + 1]))[0] > 0)
    return result


def _forms(loop: OpenLoop, omega: Reals, phase: Reals) -> list[tuple[float, float]]:
    """The argument in the form for abs L < 1 and in the form for abs L > 1, at crossovers, where both
    hold.
    """
    denominator = log_factors(omega, loop.poles).imag + loop.all_pass * np.arctan(omega)
    half = 0.5 * _wrapped(phase)
    # at a crossover Arg(1 + L) is half the principal phase, and Arg(1 + 1/L) its negative
    below, above = denominator + half, denominator + phase - half
    return list(zip(below.tolist(), above.tolist(), strict=True))


def _forms_at_origin(loop: OpenLoop) -> tuple[float, float]:
    denominator = _argument_at_origin(loop.poles)
    response = _argument_at_origin(loop.zeros) - denominator + (math.pi if loop.sign < 0 else 0.0)
    return denominator, denominator + response


def _forms_at_infinity(loop: OpenLoop) -> tuple[float, float]:
    denominator = (len(loop.poles) + loop.all_pass) * math.pi / 2
    numerator = (len(loop.zeros) - loop.all_pass) * math.pi / 2
    # the principal values vanish at both ends: L is real there, or 0, or without bound
    return denominator, numerator + (math.pi if loop.sign < 0 else 0.0)


def _argument_at_origin(roots: Complexes) -> float:
    """Argument of ∏(jω − r) as ω falls to 0, in the convention of `log_factors`."""
    turns = 0.0
    for root in roots.tolist():
        if root.imag == 0:
            turns += 0.5 if root.real > 0 else 0.25 if root.real == 0 else 0.0
        elif root.imag > 0 and root.real > 0:
            # conjugate factors cancel, but for the whole turn that the convention gives a pair on the right
            turns += 1.0
    return 2.0 * math.pi * turns


def _wrapped(angle: Reals) -> Reals:
    """The angle in (−π, π]."""
    return np.asarray(-((math.pi - angle) % (2 * math.pi)) + math.pi)
