"""Margins of a loop at its scans by dense search over the angle ωh, each find narrowed down at ninety digits.

The definitions are the interface's, section 4; ω = 0 and the Nyquist frequency count. The delay margin is
looked for by lengthening the dead time in small steps and computing every root anew, with no use of L. A
margin that does not exist is None.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from mpmath import mp, mpc, mpf
from scipy.linalg import expm

from tests.references.sampled_told import (
    DIGITS,
    ExactSampledLoop,
    closed_loop_roots,
    companion,
    roots_outside,
)
from tests.references.told import Polynomial, value_at

POINTS_A_DECADE = 300
POINTS_ABOVE = 3000
POINTS_A_TURN = 60
NEAREST = 6


@dataclass(frozen=True)
class ReferenceMargins:
    """Frequencies in rad/s. Of the phase crossovers those with abs L nearest to 1 on either side."""

    gain_crossovers: list[Any]
    phase_margins_deg: list[Any]
    gain_margin: Any
    gain_reduction_margin: Any
    phase_margin_deg: Any
    max_sensitivity: Any
    max_complementary_sensitivity: Any
    disk_margin: Any
    max_control_sensitivity: Any
    output_gain_high_frequency: Any


def reference_margins(loop: ExactSampledLoop) -> ReferenceMargins:
    """Every margin but the delay margin, of a loop that is known to be stable."""
    with mp.workdps(DIGITS):
        circle = Circle(loop)
        theta = circle.grid
        response = circle.float_loop(theta)
        gain_at = _zeros(lambda t: mp.log(abs(circle.at(t))), theta, np.log(np.abs(response)))
        phases = [mp.degrees(mp.arg(-circle.at(t))) for t in gain_at]
        near = _nearest(response)
        phase_at = _zeros(lambda t: circle.at(t).imag, theta, response.imag, near)
        factors = [1 / abs(circle.at(t)) for t in phase_at if circle.at(t).real < 0]
        ends = circle.ends()
        factors += [-1 / end.real for end, _ in ends if end is not None and end.real < 0]
        path = circle.float_controller(theta)

        def largest(of: Callable[[Any, Any], Any]) -> Any:
            return _largest(circle, theta, response, path, of, ends)

        return ReferenceMargins(
            gain_crossovers=[t / loop.interval for t in gain_at],
            phase_margins_deg=phases,
            gain_margin=min((f for f in factors if f > 1), default=None),
            gain_reduction_margin=max((f for f in factors if f < 1), default=None),
            phase_margin_deg=min((abs(p) for p in phases), default=None),
            max_sensitivity=largest(lambda value, _: 1 / (1 + value)),
            max_complementary_sensitivity=largest(lambda value, _: value / (1 + value)),
            disk_margin=min(mpf(2), 2 / largest(lambda value, _: (1 - value) / (1 + value))),
            max_control_sensitivity=largest(lambda value, c: c / (1 + value)),
            output_gain_high_frequency=abs(circle.controller_at(mp.pi)),
        )


class Circle:
    """L on the unit circle, exactly and in float64."""

    def __init__(self, loop: ExactSampledLoop) -> None:
        self._controller = loop.controller()
        up, down, self._whole = loop.plant_ratio()
        self._plant = up, down
        self._characteristic = loop.characteristic()
        self._shifted = [_about_one(p) for p in (*self._controller, *self._plant)]

    def at(self, theta: Any) -> Any:
        """L(e^(jθ))."""
        z = mp.expj(theta)
        return (
            self.controller_at(theta)
            * value_at(self._plant[0], z)
            / value_at(self._plant[1], z)
            / z**self._whole
        )

    def controller_at(self, theta: Any) -> Any:
        """C·F there."""
        z = mp.expj(theta)
        return value_at(self._controller[0], z) / value_at(self._controller[1], z)

    def float_loop(self, theta: Any) -> Any:
        """L at angles of shape (m,), about z = 1, where digits are short."""
        v = np.expm1(1j * theta)
        plant = np.polyval(self._shifted[2], v) / np.polyval(self._shifted[3], v)
        return self.float_controller(theta) * plant * np.exp(-1j * self._whole * theta)

    def float_controller(self, theta: Any) -> Any:
        """C·F, likewise."""
        v = np.expm1(1j * theta)
        return np.polyval(self._shifted[0], v) / np.polyval(self._shifted[1], v)

    def ends(self) -> list[tuple[Any, Any]]:
        """(L, C·F) at z = 1 and at z = −1; None for what has a pole there. A double pole weighs as one."""
        found = []
        for z in (mpf(1), mpf(-1)):
            values = [value_at(p, z) for p in (*self._controller, *self._plant)]
            tiny = mpf("1e-60")
            up, down = values[0] * values[2], values[1] * values[3] * z**self._whole
            found.append(
                (
                    None if abs(down) < tiny else mpc(up / down),
                    None if abs(values[1]) < tiny else mpc(values[0] / values[1]),
                )
            )
        return found

    @cached_property
    def grid(self) -> Any:
        """Angles up to π, denser about every root of the loop, open or closed."""
        roots = [
            complex(root)
            for p in (*self._controller, *self._plant, self._characteristic)
            for root in closed_loop_roots(p)
            if abs(root) > 0.05
        ]
        logs = np.array([np.log(root) for root in roots if abs(root - 1) > 1e-12], complex)
        sizes = np.abs(logs)
        low = 1e-3 * min(sizes.min(initial=1.0), 1.0)
        parts = [
            np.geomspace(low, np.pi, int(POINTS_A_DECADE * np.log10(np.pi / low)) + 2),
            np.linspace(low, np.pi, POINTS_ABOVE + POINTS_A_TURN * self._whole // 2),
        ]
        spread = np.geomspace(1e-3, 30.0, 60)
        for log in logs:
            reach = max(abs(log.real), 1e-9) * np.concatenate([-spread[::-1], [0.0], spread])
            parts.append(abs(log.imag) + reach)
        # what lies nearer to z = −1 than a step of the grid
        parts.append(np.pi - np.geomspace(1e-7, 0.1, 200))
        grid = np.unique(np.concatenate(parts))
        return grid[(grid >= low) & (grid < np.pi - 1e-9)]


def _about_one(polynomial: Polynomial) -> Any:
    """The polynomial's coefficients in v = z − 1, as float64."""
    values = list(polynomial)
    size = len(values)
    for end in range(size, 0, -1):
        for index in range(1, end):
            values[index] += values[index - 1]
    return np.array([float(value) for value in values])


def _nearest(response: Any) -> Any:
    changes = np.flatnonzero(np.sign(response.imag[:-1]) != np.sign(response.imag[1:]))
    changes = changes[np.minimum(response.real[changes], response.real[changes + 1]) < 0]
    logs = np.log(np.abs(response[changes]))
    inside, outside = changes[logs < 0], changes[logs >= 0]
    inside = inside[np.argsort(-np.abs(response[inside]))][:NEAREST]
    outside = outside[np.argsort(np.abs(response[outside]))][:NEAREST]
    # a crossing with abs L next to 1 may fall on either side between two points
    return np.sort(np.concatenate([inside, outside]))


def _zeros(function: Callable[[Any], Any], theta: Any, values: Any, changes: Any | None = None) -> list[Any]:
    if changes is None:
        changes = np.flatnonzero(np.sign(values[:-1]) != np.sign(values[1:]))
    found = []
    for index in changes:
        low, high = mpf(float(theta[index])), mpf(float(theta[index + 1]))
        if mp.sign(function(low)) == mp.sign(function(high)):
            continue
        with mp.workdps(40):
            found.append(
                mp.findroot(function, (low, high), solver="anderson", tol=1e-60, maxsteps=60, verify=False)
            )
    return found


def _largest(
    circle: Circle, theta: Any, response: Any, path: Any, of: Callable[[Any, Any], Any], ends: Any
) -> Any:
    """sup over the circle: its ends, and every peak of the grid near the highest, narrowed down."""
    with np.errstate(all="ignore"):
        values = np.abs(of(response, path))
    values[~np.isfinite(values)] = 0.0
    # beside a pole at z = 1 the value at the first point stands for the limit
    found = [
        _limit(circle, of, end, at)
        for end, at in zip(ends, (mpf("1e-25"), mp.pi - mpf("1e-25")), strict=True)
    ]
    peaks = np.flatnonzero((values[1:-1] >= values[:-2]) & (values[1:-1] >= values[2:])) + 1
    for peak in peaks[np.argsort(-values[peaks])][:6]:
        if values[peak] > 0.98 * values.max():
            found.append(_peak(circle, of, float(theta[peak - 1]), float(theta[peak + 1])))
    return max(found)


def _limit(circle: Circle, of: Callable[[Any, Any], Any], end: Any, beside: Any) -> Any:
    if None not in end:
        return abs(of(*end))
    return abs(of(circle.at(beside), circle.controller_at(beside)))


def _peak(circle: Circle, of: Callable[[Any, Any], Any], low: float, high: float) -> Any:
    """Three rounds of sixteen points, then the parabola through the highest three."""
    with mp.workdps(40):
        a, b = mpf(low), mpf(high)
        for _ in range(5):
            at = [a + (b - a) * index / 12 for index in range(13)]
            values = [abs(of(circle.at(t), circle.controller_at(t))) for t in at]
            best = min(max(values.index(max(values)), 1), 11)
            a, b = at[best - 1], at[best + 1]
        left, middle, right = values[best - 1 : best + 2]
        if middle < max(left, right) or middle == left == right:
            # no peak lies inside: the grid's own rounding looked like one
            return max(values)
        return middle - (right - left) ** 2 / (8 * (left - 2 * middle + right))


NEAR_THE_CIRCLE = 1e-3
"""A root that comes as near as this between two steps may have been outside for a moment."""


def reference_delay_margin(loop: ExactSampledLoop, most: float, steps_a_scan: int = 20) -> Any:
    """The least extra dead time, up to `most` seconds, with a root on the unit circle; None without one.

    By every root of the loop, its plant sampled anew, in steps of a part of a scan, and of 2 % of what is
    already added where that is more; the interval is then halved by counting, at last at ninety digits. Where
    the outermost root comes near the circle and goes back between two steps, the nearest place is looked at.
    """
    interval = float(loop.interval)
    fast = FloatRoots(loop)
    low, high = 0.0, None
    extra = whole = 0.0
    first = float(mp.ceil(loop.delay / loop.interval) * loop.interval - loop.delay)
    before, here = 0.0, fast.radius(0.0)
    while extra < most:
        step = max(interval / steps_a_scan, 0.02 * extra)
        following = extra + step
        # whole scans are stepped on, exactly: a direct path jumps there
        whole = first + np.ceil((extra - first) / interval + 1e-9) * interval
        if extra < whole * (1 - 1e-12) < following:
            following = whole
        there = fast.radius(following)
        if before <= here >= there and here > 1.0 - NEAR_THE_CIRCLE:
            nearest = _largest_radius(fast, max(2.0 * extra - following, 0.0), following)
            if fast.radius(nearest) >= 1.0:
                low, high = max(2.0 * extra - following, 0.0), nearest
                break
        if there >= 1.0:
            high = following
            break
        if following == whole and fast.radius(whole * (1 - 1e-11)) >= 1.0:
            # outside until the jump, and back inside behind it
            high = whole * (1 - 1e-11)
            break
        before, here = here, there
        extra = low = following
    if high is None:
        return None
    if high == whole and fast.radius(high * (1 - 1e-11)) < 1.0:
        # a direct path comes a scan later from here on: the roots jump
        return mpf(high)
    while high - low > 1e-9 * high:
        middle = 0.5 * (low + high)
        if fast.radius(middle) >= 1.0:
            high = middle
        else:
            low = middle
    return _sharpened(loop, low, high)


def _largest_radius(fast: FloatRoots, low: float, high: float) -> float:
    """Where between two delays the outermost root lies farthest out, by golden sections."""
    share = 0.5 * (5.0**0.5 - 1.0)
    for _ in range(40):
        one, other = high - share * (high - low), low + share * (high - low)
        low, high = (low, other) if fast.radius(one) >= fast.radius(other) else (one, high)
    return 0.5 * (low + high)


def _sharpened(loop: ExactSampledLoop, low: float, high: float) -> Any:
    """By secants on ln of the outermost root's magnitude; by counting where it jumps."""
    with mp.workdps(DIGITS):
        one, other = mpf(low) * (1 - mpf("2e-6")), mpf(high) * (1 + mpf("2e-6"))
        values = []
        for extra in (one, other):
            values.append(mp.log(max(abs(root) for root in closed_loop_roots(loop.characteristic(extra)))))
        if not (values[0] < 0 < values[1]) or values[1] - values[0] > mpf("1e-3"):
            return mpf(0.5 * (low + high))
        for _ in range(4):
            middle = (one * values[1] - other * values[0]) / (values[1] - values[0])
            value = mp.log(max(abs(root) for root in closed_loop_roots(loop.characteristic(middle))))
            # a secant through the two last points
            one, other, values = other, middle, [values[1], value]
            if abs(value) < mpf("1e-25") or one == other or values[0] == values[1]:
                break
        if roots_outside(loop.characteristic(other * (1 + mpf("1e-10")))) == 0:
            raise ValueError("no root is outside behind the delay margin")
        return other


class FloatRoots:
    """The spectral radius for a lengthened delay, in float64, by the states from scan to scan."""

    def __init__(self, loop: ExactSampledLoop) -> None:
        self._loop = loop
        told = loop.told
        a, b, c, d = companion(told.plant_numerator, told.plant_denominator)
        self._n = len(a)
        self._augmented = np.zeros((self._n + 1, self._n + 1))
        for row in range(self._n):
            self._augmented[row] = [*map(float, a[row]), float(b[row])]
        self._c, self._d = np.array([float(v) for v in c]), float(d)
        self._controller = _float_states(*loop.controller())

    def radius(self, extra: float) -> float:
        n, loop = self._n, self._loop
        h = float(loop.interval)
        scans = (float(loop.delay) + extra) / h
        whole = round(scans)
        if abs(scans - whole) > 1e-12 * max(1.0, scans):
            whole = int(np.floor(scans))
        fraction = max(0.0, scans - whole) if abs(scans - whole) > 1e-12 * max(1.0, scans) else 0.0
        first, second = expm(self._augmented * (fraction * h)), expm(self._augmented * ((1 - fraction) * h))
        phi, gamma0 = second[:n, :n] @ first[:n, :n], second[:n, n]
        gamma1 = second[:n, :n] @ first[:n, n]
        ca, cb, cc, cd = self._controller
        m, line = len(ca), whole + 1
        size = n + m + line
        pv = np.zeros(size)
        pv[:n] = self._c
        pv[n + m + whole] += self._d  # w[n−k−1], the last of the line
        u = np.zeros(size)
        u[n : n + m] = cc
        u -= cd * pv
        matrix = np.zeros((size, size))
        matrix[:n, :n] = phi
        matrix[:n, n + m + whole] += gamma1
        if whole:
            matrix[:n, n + m + whole - 1] += gamma0
        else:
            matrix[:n] += np.outer(gamma0, u)
        matrix[n : n + m, n : n + m] = ca
        matrix[n : n + m] -= np.outer(cb, pv)
        matrix[n + m] = u
        for index in range(1, line):
            matrix[n + m + index, n + m + index - 1] = 1.0
        return float(np.abs(np.linalg.eigvals(matrix)).max())


def _float_states(numerator: Polynomial, denominator: Polynomial) -> tuple[Any, Any, Any, float]:
    """The observable form of a proper ratio of polynomials in z."""
    size = len(denominator) - 1
    down = [float(value / denominator[0]) for value in denominator]
    up = [0.0] * (size + 1 - len(numerator)) + [float(value / denominator[0]) for value in numerator]
    a, b, c = np.zeros((size, size)), np.zeros(size), np.zeros(size)
    for index in range(size):
        a[index, 0] = -down[index + 1]
        if index + 1 < size:
            a[index, index + 1] = 1.0
        b[index] = up[index + 1] - down[index + 1] * up[0]
    if size:
        c[0] = 1.0
    return a, b, c, up[0]
