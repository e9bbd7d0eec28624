"""Step responses by marching the delayed loop in small steps.

The plant's input w(t) = u(t − θ) + load(t − θ) of one dead time is known from the one before, so that within
it the loop is ẋ = A·x + B·w + E·SP with a known w. The linear part is stepped by the matrix exponential,
exactly, and w between nodes is the cubic through four of them: no step is too long for a stiff filter, and
the error is of the fourth order in the step. Nodes are aligned with the dead time: no kink lies between two
of them. States are those of a cascade of complex first-order sections, hidden ones included.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from mpmath import mpf
from scipy.linalg import expm

from tests.references.told import ExactLoop, polynomial_roots

STEPS_A_TIME_CONSTANT = 40
STEPS_A_DEAD_TIME = 60
MOST_STEPS = 2_000_000


@dataclass(frozen=True)
class Marched:
    """Pieces of equal length `step`: on each the cubic through values and slopes at both ends.

    Arrays have shape (pieces,): PV and its slope at the left and the right end, u likewise.
    """

    step: float
    start: Any
    pv: tuple[Any, Any]
    pv_slope: tuple[Any, Any]
    output: tuple[Any, Any]
    output_slope: tuple[Any, Any]


@dataclass(frozen=True)
class _Cut:
    """The loop cut at the plant's input, in the loop's own unit of time."""

    a: Any
    b: Any
    e: Any
    c_y: Any
    d_y: complex
    c_u: Any
    d_u: complex
    r_u: complex
    theta: float


def march(loop: ExactLoop, horizon: float, *, load: bool = False, finer: int = 1) -> Marched:
    """The response to a unit step of the set point, or of the load at the controller's output, to `horizon`.

    ValueError where the derivative is unfiltered and the set point steps through it, or is not realisable.
    """
    cut = _cut(loop)
    setpoint = 0.0 if load else 1.0
    if cut.theta == 0:
        return _without_dead_time(cut, setpoint, 1.0 if load else 0.0, horizon, finer)
    return _with_dead_time(cut, setpoint, 1.0 if load else 0.0, horizon, finer)


def _with_dead_time(cut: _Cut, setpoint: float, load: float, horizon: float, finer: int) -> Marched:
    fastest = max(np.abs(np.diag(cut.a)).max(), 1e-300)
    count = max(STEPS_A_DEAD_TIME, int(STEPS_A_TIME_CONSTANT * fastest * cut.theta) + 1) * finer
    intervals = int(np.ceil(horizon / cut.theta))
    _bounded(count * intervals)
    step = cut.theta / count
    phi, weights, gamma = _steppers(cut, step, setpoint)
    x = np.zeros(len(cut.a), dtype=complex)
    w = np.zeros(count + 1, dtype=complex)
    pieces = []
    for _ in range(intervals):
        states = _one_dead_time(x, w, phi, weights, gamma)
        slopes = states @ cut.a.T + np.outer(w, cut.b) + cut.e * setpoint
        w_slope = _slope(w, step)
        pv, u = states @ cut.c_y + cut.d_y * w, states @ cut.c_u + cut.d_u * w + cut.r_u * setpoint
        pv_slope, u_slope = slopes @ cut.c_y + cut.d_y * w_slope, slopes @ cut.c_u + cut.d_u * w_slope
        pieces.append((pv.real, pv_slope.real, u.real, u_slope.real))
        x, w = states[-1], u + load
    return _marched(step, pieces)


def _without_dead_time(cut: _Cut, setpoint: float, load: float, horizon: float, finer: int) -> Marched:
    k = 1.0 / (1.0 - cut.d_u)
    a = cut.a + k * np.outer(cut.b, cut.c_u)
    forced = cut.e * setpoint + cut.b * k * (cut.r_u * setpoint + load)
    fastest = max(np.abs(np.linalg.eigvals(a)).max(), 1e-300)
    count = int(STEPS_A_TIME_CONSTANT * fastest * horizon) * finer + 10
    _bounded(count)
    step = horizon / count
    size = len(a)
    augmented = np.zeros((size + 1, size + 1), dtype=complex)
    augmented[:size, :size], augmented[:size, size] = a, forced
    stepped = expm(augmented * step)
    states = np.zeros((count + 1, size), dtype=complex)
    for index in range(count):
        states[index + 1] = stepped[:size, :size] @ states[index] + stepped[:size, size]
    slopes = states @ a.T + forced
    w = k * (states @ cut.c_u + cut.r_u * setpoint + load)
    w_slope = k * (slopes @ cut.c_u)
    pv, u = states @ cut.c_y + cut.d_y * w, w - load
    pv_slope = slopes @ cut.c_y + cut.d_y * w_slope
    return _marched(step, [(pv.real, pv_slope.real, u.real, w_slope.real)])


def _cut(loop: ExactLoop) -> _Cut:
    a, b, c_y, d_y = _plant(loop)
    n = len(a)
    order = n + 3
    big_a = np.zeros((order, order), dtype=complex)
    big_b, e = np.zeros(order, dtype=complex), np.zeros(order, dtype=complex)
    big_a[:n, :n], big_b[:n] = a, b
    y = np.concatenate([c_y, np.zeros(3)])
    feedback, setpoint, tf = loop.feedback, loop.setpoint, float(loop.tf)
    # measured: PV through the filter, or PV itself
    measured, measured_w = y, d_y
    if loop.measurement_filter > 0:
        rate = 1.0 / float(loop.measurement_filter)
        big_a[n], big_b[n] = rate * y, rate * d_y
        big_a[n, n] -= rate
        measured, measured_w = _unit(order, n), 0.0
    ki, kp, kd = float(feedback.ki), float(feedback.kp), float(feedback.kd)
    big_a[n + 1], big_b[n + 1], e[n + 1] = -ki * measured, -ki * measured_w, float(setpoint.ki)
    c_u, d_u, r_u = -kp * measured + _unit(order, n + 1), -kp * measured_w, float(setpoint.kp)
    if kd != 0 and tf > 0:
        # Kd·s/(1+Tf·s) = Kd/Tf·(1 − 1/(1+Tf·s)); the state is the lag of what the derivative sees
        big_a[n + 2], big_b[n + 2] = -kd / tf * measured / tf, -kd / tf * measured_w / tf
        e[n + 2] = float(setpoint.kd) / tf / tf
        big_a[n + 2, n + 2] -= 1.0 / tf
        c_u = c_u - kd / tf * measured - _unit(order, n + 2)
        d_u, r_u = d_u - kd / tf * measured_w, r_u + float(setpoint.kd) / tf
    elif kd != 0:
        if setpoint.kd != 0 or measured_w != 0:
            raise ValueError("an unfiltered derivative of a step")
        rate_row, rate_w = measured @ big_a, measured @ big_b
        c_u, d_u = c_u - kd * rate_row, d_u - kd * rate_w
    sign = loop.direction
    return _Cut(big_a, big_b, e, y, d_y, sign * c_u, sign * d_u, sign * r_u, float(loop.dead_time))


def _plant(loop: ExactLoop) -> tuple[Any, Any, Any, Any]:
    """A cascade of complex sections (s−z)/(s−p) and abs p/(s−p), the scales taken back in the gain."""
    zeros = [complex(root) for root in polynomial_roots(loop.plant_numerator)]
    poles = [complex(root) for root in polynomial_roots(loop.plant_denominator)]
    gain = loop.plant_numerator[0] / loop.plant_denominator[0]
    size = len(poles)
    a, b = np.zeros((size, size), dtype=complex), np.zeros(size, dtype=complex)
    row, through = np.zeros(size, dtype=complex), complex(1.0)
    for index, pole in enumerate(poles):
        scale = abs(pole) or 1.0
        a[index], b[index] = scale * row, scale * through
        a[index, index] += pole
        out = np.zeros(size, dtype=complex)
        if index < len(zeros):
            out[index] = (pole - zeros[index]) / scale
            row = row + out
        else:
            out[index] = 1.0
            row, through = out, complex(0.0)
            gain = gain / mpf(scale)
    return a, b, float(gain) * row, float(gain) * through


def _steppers(cut: _Cut, step: float, setpoint: float) -> tuple[Any, Any, Any]:
    """Φ, the weights of w and of its first three derivatives at the left node, and the set point's part."""
    size = len(cut.a)
    chain = np.zeros((size + 5, size + 5), dtype=complex)
    chain[:size, :size], chain[:size, size], chain[:size, size + 4] = cut.a, cut.b, cut.e * setpoint
    for index in range(3):
        chain[size + index, size + index + 1] = 1.0
    stepped = expm(chain * step)
    derivatives = stepped[:size, size : size + 4]
    weights = []
    for offsets in ((0, 1, 2, 3), (-1, 0, 1, 2), (-2, -1, 0, 1)):
        # value and derivatives at 0 of the cubic through four nodes, as combinations of the nodes
        nodes = np.array(offsets, dtype=float)
        powers = np.linalg.inv(np.vander(nodes, 4, increasing=True))
        scale = np.array([1.0, 1.0 / step, 2.0 / step**2, 6.0 / step**3])
        weights.append(derivatives @ (scale[:, None] * powers))
    return stepped[:size, :size], weights, stepped[:size, size + 4]


def _one_dead_time(x: Any, w: Any, phi: Any, weights: list[Any], gamma: Any) -> Any:
    count = len(w) - 1
    windows = np.lib.stride_tricks.sliding_window_view(w, 4)
    forced = np.empty((count, len(x)), dtype=complex)
    forced[0] = windows[0] @ weights[0].T
    forced[1:-1] = windows @ weights[1].T
    forced[-1] = windows[-1] @ weights[2].T
    forced += gamma
    states = np.empty((count + 1, len(x)), dtype=complex)
    states[0] = x
    for index in range(count):
        states[index + 1] = phi @ states[index] + forced[index]
    return states


def _slope(values: Any, step: float) -> Any:
    """The slope by differences through five nodes, one-sided at the ends: the fourth order in the step."""
    slope = np.empty_like(values)
    slope[2:-2] = values[:-4] - 8 * values[1:-3] + 8 * values[3:-1] - values[4:]
    for end, sign in ((values, 1), (values[::-1], -1)):
        at = slope[::sign]
        at[0] = sign * (-25 * end[0] + 48 * end[1] - 36 * end[2] + 16 * end[3] - 3 * end[4])
        at[1] = sign * (-3 * end[0] - 10 * end[1] + 18 * end[2] - 6 * end[3] + end[4])
    return slope / (12 * step)


def _marched(step: float, pieces: list[Any]) -> Marched:
    ends = []
    for which in range(4):
        left = np.concatenate([piece[which][:-1] for piece in pieces])
        right = np.concatenate([piece[which][1:] for piece in pieces])
        ends.append((left, right))
    start = step * np.arange(len(ends[0][0]))
    return Marched(step, start, ends[0], ends[1], ends[2], ends[3])


def _bounded(steps: int) -> None:
    if steps > MOST_STEPS:
        raise ValueError(f"{steps} steps are too many for this reference")


def _unit(order: int, index: int) -> Any:
    row = np.zeros(order)
    row[index] = 1.0
    return row
