"""Margins by dense search over frequency, each find bisected at fifty digits.

The definitions are the interface's, section 4. A margin that does not exist is None.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from mpmath import mp, mpc, mpf

from tests.references.told import ExactLoop, polynomial_roots

POINTS_A_DECADE = 3000
POINTS_A_DEAD_TIME_TURN = 60
LOWEST_MAGNITUDE = 0.02


@dataclass(frozen=True)
class ReferenceMargins:
    """Frequencies in rad/s. Of the phase crossovers only those with abs L nearest to 1 on either side."""

    gain_crossovers: list[Any]
    phase_margins_deg: list[Any]
    phase_crossovers: list[Any]
    gain_factors: list[Any]
    gain_margin: Any
    gain_reduction_margin: Any
    phase_margin_deg: Any
    delay_margin: Any
    max_sensitivity: Any
    max_complementary_sensitivity: Any
    disk_margin: Any


def reference_margins(loop: ExactLoop) -> ReferenceMargins:
    """Every margin of a loop that is known to be stable."""
    omega = frequencies(loop)
    response = float_response(loop, omega)
    gain_at = _bisected(lambda w: mp.log(abs(_at(loop, w))), omega, np.log(np.abs(response)))
    phases = [_phase_margin_deg(_at(loop, w)) for w in gain_at]
    nearest = _nearest_to_one(response)
    phase_at = _bisected(lambda w: _at(loop, w).imag, omega, response.imag, nearest)
    factors = [1 / abs(_at(loop, w)) for w in phase_at]
    high = _high_frequency_magnitude(loop)
    ends = [1 / high] if high > 0 and (loop.dead_time > 0 or _high_frequency_sign(loop) < 0) else []
    ends += _factor_at_origin(loop)
    above = [factor for factor in factors + ends if factor > 1]
    below = [factor for factor in factors + ends if factor < 1]
    delays = [mp.radians(p if p > 0 else p + 360) / w for p, w in zip(phases, gain_at, strict=True)]
    if high >= 1:
        delays.append(mpf(0))
    sensitivity_ends, complementary_ends, disk_ends = _ends(loop, high)
    return ReferenceMargins(
        gain_crossovers=gain_at,
        phase_margins_deg=phases,
        phase_crossovers=phase_at,
        gain_factors=factors,
        gain_margin=min(above, default=None),
        gain_reduction_margin=max(below, default=None),
        phase_margin_deg=min((abs(phase) for phase in phases), default=None),
        delay_margin=min(delays, default=None),
        max_sensitivity=_largest(loop, omega, response, lambda x: 1 / (1 + x), sensitivity_ends),
        max_complementary_sensitivity=_largest(
            loop, omega, response, lambda x: x / (1 + x), complementary_ends
        ),
        disk_margin=2 / _largest(loop, omega, response, lambda x: (1 - x) / (1 + x), disk_ends),
    )


def frequencies(loop: ExactLoop) -> Any:
    """A dense grid of ω in rad/s, to where abs L stays below 0.005 or repeats with the dead time."""
    roots = [
        root for root in polynomial_roots(loop.denominator) + polynomial_roots(loop.numerator) if root != 0
    ]
    magnitudes = [float(abs(root)) for root in roots] + (
        [1 / float(loop.dead_time)] if loop.dead_time else []
    )
    low, high = min(magnitudes, default=1.0), max(magnitudes, default=1.0)
    low, high = (
        _until(loop, low, 0.1, lambda m: m > 200),
        _until(loop, high, 10.0, lambda m: m < LOWEST_MAGNITUDE),
    )
    parts = [np.geomspace(low, high, int(POINTS_A_DECADE * np.log10(high / low)))]
    if loop.dead_time > 0:
        last = float(parts[0][-1])
        count = int(POINTS_A_DEAD_TIME_TURN * last * float(loop.dead_time) / (2 * np.pi)) + 10
        parts.append(np.linspace(low, last, min(count, 3_000_000)))
    for root in roots:
        # equal real roots come as pairs with what rounding at fifty digits leaves of an imaginary part
        if root.imag > mpf("1e-9") * abs(root):
            width, centre = max(abs(float(root.real)), 1e-9 * float(root.imag)), float(root.imag)
            near = width * np.sinh(np.linspace(0.0, np.arcsinh(0.8 * centre / width), 4000))
            parts += [centre - near, centre + near]
    grid = np.unique(np.concatenate(parts))
    return grid[grid > 0]


def float_response(loop: ExactLoop, omega: Any) -> Any:
    """L(jω) in float64 from the factors, for the brackets only."""
    zeros = [complex(root) for root in polynomial_roots(loop.numerator)]
    poles = [complex(root) for root in polynomial_roots(loop.denominator)]
    s = 1j * omega
    log = np.full(omega.shape, complex(mp.log(mpc(loop.numerator[0] / loop.denominator[0]))))
    with np.errstate(divide="ignore"):
        for zero in zeros:
            log = log + np.log(s - zero)
        for pole in poles:
            log = log - np.log(s - pole)
    return np.exp(log - s * float(loop.dead_time))


def _at(loop: ExactLoop, omega: Any) -> Any:
    return loop.at(mpc(0, omega))


def _until(loop: ExactLoop, omega: float, factor: float, reached: Callable[[Any], bool]) -> float:
    """Walk from `omega` by `factor` until the magnitude is where it is looked for, or changes no more."""
    before = abs(_at(loop, mpf(omega)))
    for step in range(14):
        omega *= factor
        now = abs(_at(loop, mpf(omega)))
        if step >= 1 and (reached(now) or abs(now - before) < mpf("1e-3") * now):
            break
        before = now
    return omega


def _nearest_to_one(response: Any) -> Any:
    """Where L crosses the negative real axis: the five crossings nearest to abs L = 1 on either side."""
    changes = np.flatnonzero(np.sign(response.imag[:-1]) != np.sign(response.imag[1:]))
    changes = changes[response.real[changes] < 0]
    logs = np.log(np.abs(response[changes]))
    order = changes[np.argsort(np.abs(logs))]
    inside, outside = order[np.abs(response[order]) < 1], order[np.abs(response[order]) >= 1]
    return np.sort(np.concatenate([inside[:5], outside[:5]]))


def _bisected(
    function: Callable[[Any], Any], omega: Any, values: Any, changes: Any | None = None
) -> list[Any]:
    found = []
    if changes is None:
        changes = np.flatnonzero(np.sign(values[:-1]) != np.sign(values[1:]))
    for index in changes:
        bracket = _bracket(function, omega, int(index))
        if bracket is None:
            continue
        root = mp.findroot(function, bracket, solver="anderson", verify=False)
        if bracket[0] <= root <= bracket[1] and all(
            abs(root - other) > mpf("1e-40") * root for other in found
        ):
            found.append(root)
    return found


def _bracket(function: Callable[[Any], Any], omega: Any, index: int) -> tuple[Any, Any] | None:
    """Where the sign changes at fifty digits: with a root on the grid float64 may see it one step beside."""
    at = [mpf(float(value)) for value in omega[max(index - 1, 0) : index + 3]]
    signs = [mp.sign(function(value)) for value in at]
    order = sorted(range(len(at) - 1), key=lambda step: abs(step - min(index, 1)))
    return next(((at[step], at[step + 1]) for step in order if signs[step] != signs[step + 1]), None)


def _phase_margin_deg(value: Any) -> Any:
    return mp.degrees(mp.arg(-value))


def _high_frequency_magnitude(loop: ExactLoop) -> Any:
    if len(loop.numerator) < len(loop.denominator):
        return mpf(0)
    return abs(loop.numerator[0] / loop.denominator[0])


def _high_frequency_sign(loop: ExactLoop) -> int:
    return int(mp.sign(loop.numerator[0] / loop.denominator[0]))


def _factor_at_origin(loop: ExactLoop) -> list[Any]:
    """ω = 0 counts: where L(0) is a negative number, the factor that brings it to −1."""
    if loop.denominator[-1] == 0:
        return []
    value = loop.numerator[-1] / loop.denominator[-1]
    return [-1 / value] if value < 0 else []


def _ends(loop: ExactLoop, high: Any) -> tuple[list[Any], list[Any], list[Any]]:
    """abs S, abs T and abs (1−L)/(1+L) at ω = 0 and at infinity, where dead time takes every phase."""
    values: list[Any] = [] if loop.denominator[-1] == 0 else [mpc(loop.numerator[-1] / loop.denominator[-1])]
    if loop.dead_time > 0 and high > 0:
        values += [mpc(-high), mpc(high)]
    else:
        values.append(mpc(high * _high_frequency_sign(loop)))
    sensitivity = [abs(1 / (1 + value)) for value in values]
    complementary = [abs(value / (1 + value)) for value in values]
    disk = [abs((1 - value) / (1 + value)) for value in values]
    if loop.denominator[-1] == 0:
        complementary, disk = [*complementary, mpf(1)], [*disk, mpf(1)]
    return sensitivity, complementary, disk


def _largest(
    loop: ExactLoop, omega: Any, response: Any, of_loop: Callable[[Any], Any], ends: list[Any]
) -> Any:
    """sup over the axis: the ends, and every grid peak within 1 % of the highest, narrowed down."""
    with np.errstate(all="ignore"):
        values = np.abs(of_loop(response))
    values[~np.isfinite(values)] = 0.0
    peaks = np.flatnonzero((values[1:-1] >= values[:-2]) & (values[1:-1] >= values[2:])) + 1
    found = list(ends)
    for peak in peaks[np.argsort(-values[peaks])][:12]:
        if values[peak] > 0.9 * values.max():
            found.append(_peak(lambda w: abs(of_loop(_at(loop, w))), omega[peak - 1], omega[peak + 1]))
    return max(found)


def _peak(function: Callable[[Any], Any], low: float, high: float) -> Any:
    """The maximum within a bracket by golden section; right to the square of the last bracket."""
    golden = (mp.sqrt(5) - 1) / 2
    a, b = mpf(float(low)), mpf(float(high))
    c, d = b - golden * (b - a), a + golden * (b - a)
    fc, fd = function(c), function(d)
    for _ in range(70):
        if fc > fd:
            b, d, fd = d, c, fc
            c = b - golden * (b - a)
            fc = function(c)
        else:
            a, c, fc = c, d, fd
            d = a + golden * (b - a)
            fd = function(d)
    return max(fc, fd)
