"""Route B: characteristic roots of the closed loop, dead time exact.

The infinitesimal generator of the closed loop as a delay system is discretised by Chebyshev collocation of the
delayed controller output [1]; its eigenvalues are starting points only, and each is polished by Newton on
D(s) + N(s)·e^(−sθ) itself. In the right half plane a root needs abs N/D ≥ 1, which bounds its frequency and so the
number of nodes that resolve all of them.

[1] D. Breda, S. Maset, R. Vermiglio, Pseudospectral differencing methods for characteristic roots of delay
    differential equations, SIAM J. Sci. Comput. 27 (2005) 482-495; Stability of Linear Delay Differential
    Equations, Springer 2015, chapter 5. From memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import Complexes, OpenLoop, Reals, reciprocal_sum
from service.analysis.nyquist import Count, count_right_of_axis, rounding
from service.analysis.realisation import StateSpace

MAX_NODES = 320
"""Work bound: more nodes than this and the roots are not computed."""

FEW_NODES = 40
LEVELS = (3.0, 1.5, 0.7, 0.2, 0.02)
"""How far below 1, in nepers, abs L is still resolved; the first that needs few nodes is taken."""


@dataclass(frozen=True, eq=False)
class CharacteristicRoots:
    """Roots on and above the real axis, rightmost first, complex, shape (m,), in the loop's own unit of time.

    `complete_right_of`: every root right of this line is in the list (counted there by the argument principle).
    Hidden roots are not included. `count` is this route's own count right of the axis.
    """

    roots: Complexes
    complete_right_of: float
    count: Count


def characteristic_roots(space: StateSpace | None, axis: AxisResponse) -> CharacteristicRoots:
    """Polished roots of 1 + L from the state space of the closed loop."""
    loop = axis.loop
    if loop.dead_time > 0 and loop.high_frequency_magnitude >= 1.0:
        return _infinite_chain(loop)
    nodes = _node_count(axis)
    if nodes > MAX_NODES:
        reason = (
            "the dead time is too long against the loop's fastest gain crossover for the roots to be computed"
        )
        return CharacteristicRoots(np.empty(0, complex), math.inf, Count(None, reason=reason))
    starts = _starts(space, loop, nodes)
    upper = starts[starts.imag >= 0]
    roots, moved = _polish(loop, upper)
    roots = _distinct(upper, roots, moved)
    roots = roots[np.lexsort((np.abs(roots.imag), -roots.real))]
    if loop.dead_time == 0:
        return CharacteristicRoots(roots, -math.inf, _count(loop, roots))
    roots = roots[np.abs(roots.imag) * loop.dead_time <= 0.7 * nodes]
    count = _count(loop, roots)
    if count.roots is None:
        return CharacteristicRoots(roots, math.inf, count)
    kept, line = _verified(loop, roots)
    return CharacteristicRoots(kept, line, count)


def root_error(loop: OpenLoop, roots: Complexes) -> Reals:
    """How far rounding may move each root, shape of `roots`."""
    value = loop.at(roots)
    derivative = (1 + value) * reciprocal_sum(roots, loop.poles) + value * loop.log_derivative(roots)
    with np.errstate(all="ignore"):
        error = rounding(loop, np.abs(roots)) * (1 + np.abs(value)) / np.abs(derivative)
    return np.where(np.isfinite(error), error, 1e-13 * np.abs(roots))


def _infinite_chain(loop: OpenLoop) -> CharacteristicRoots:
    # of neutral type: the roots far from the origin lie at Re s = ln abs L(∞)/θ
    real_part = (
        math.log(loop.high_frequency_magnitude) if math.isfinite(loop.high_frequency_magnitude) else math.inf
    )
    near = abs(real_part) <= float(rounding(loop, np.zeros(1))[0])
    count = (
        Count(None, reason="the chain of roots lies on the axis within the precision of the numbers")
        if near
        else Count(None, infinitely_many=True)
    )
    return CharacteristicRoots(np.empty(0, complex), math.inf, count)


def _node_count(axis: AxisResponse) -> int:
    if axis.loop.dead_time == 0 or axis.loop.sign == 0:
        return 16
    nodes = 0
    for level in LEVELS:
        above = axis.omega[axis.log_response.real >= -level]
        highest = float(above.max()) if above.size else 0.0
        if axis.loop.high_frequency_magnitude > 0 and axis.log_response.real[-1] >= -level:
            continue
        nodes = 14 + math.ceil(0.9 * highest * axis.loop.dead_time)
        if nodes <= FEW_NODES:
            break
    return nodes or MAX_NODES


def _starts(space: StateSpace | None, loop: OpenLoop, nodes: int) -> Complexes:
    if space is None:
        return np.roots(_characteristic_polynomial(loop)).astype(complex)
    if loop.dead_time == 0:
        return np.linalg.eigvals(space.closed_without_dead_time()[0]).astype(complex)
    return np.linalg.eigvals(generator(space, loop.dead_time, nodes)).astype(complex)


def generator(space: StateSpace, dead_time: float, nodes: int) -> Reals:
    """The collocated generator, shape (n + nodes, n + nodes): states, then u at the nodes back to t − θ."""
    n = space.order
    differentiate = chebyshev_differentiation(nodes) * (2.0 / dead_time)
    matrix = np.zeros((n + nodes, n + nodes))
    matrix[:n, :n], matrix[:n, -1] = space.a, space.b_w
    matrix[n:, n:] = differentiate[1:, 1:]
    matrix[n:, :n] = np.outer(differentiate[1:, 0], space.c_u)
    matrix[n:, -1] += differentiate[1:, 0] * space.d_u
    return matrix


@lru_cache(maxsize=64)
def chebyshev_differentiation(intervals: int) -> Reals:
    """Differentiation matrix on the Chebyshev extreme points of [−1, 1], from 1 down, shape (N+1, N+1).

    Trefethen, Spectral Methods in MATLAB (2000), chapter 6.
    """
    k = np.arange(intervals + 1)
    x = np.sin(0.5 * np.pi * (intervals - 2 * k) / intervals)
    weight = np.where((k == 0) | (k == intervals), 2.0, 1.0) * (-1.0) ** k
    difference = x[:, None] - x[None, :] + np.eye(intervals + 1)
    matrix = np.outer(weight, 1.0 / weight) / difference
    matrix -= np.diag(matrix.sum(axis=1))
    matrix.flags.writeable = False
    return matrix


def _characteristic_polynomial(loop: OpenLoop) -> Reals:
    numerator = loop.sign * math.exp(loop.log_gain) * np.atleast_1d(np.poly(loop.zeros)).real
    return np.polyadd(np.atleast_1d(np.poly(loop.poles)).real, numerator)


def _polish(loop: OpenLoop, starts: Complexes) -> tuple[Complexes, Reals]:
    """Newton on ln(−L) = 0, which is nearly linear along the chain of roots that dead time makes.

    The roots, nan where Newton did not settle, and how far each moved from its start.
    """
    at = starts.copy()
    step = np.zeros_like(at)
    for _ in range(12):
        step = _newton_step(loop, at)
        at = at + step
        if np.all(np.abs(step) <= 1e-15 * np.abs(at)):
            break
    settled = np.abs(step) <= 1e-7 * np.abs(at)
    return np.where(settled, at, np.nan), np.abs(at - starts)


def _newton_step(loop: OpenLoop, at: Complexes) -> Complexes:
    with np.errstate(all="ignore"):
        value = loop.at(at)
        # near a root 1 + L keeps the digits that the logarithm of nearly 1 would lose
        residual = np.where(np.abs(1 + value) < 1e-3, -(1 + value), np.log(-value))
        step = -residual / loop.log_derivative(at)
        # a start on a pole of L, or far left where e^(−sθ) overflows, stays where it is
        step = np.where(np.isfinite(step), step, 0.0)
        largest = 0.5 * (np.abs(at) + 1.0)
        size = np.abs(step)
        return np.where(size > largest, step * (largest / np.where(size > 0, size, 1.0)), step)


def _distinct(starts: Complexes, roots: Complexes, moved: Reals) -> Complexes:
    """The roots without those that a second start found again; true double roots have starts that lie together."""
    kept: list[int] = []
    for index in np.argsort(moved, kind="stable"):
        root = roots[index]
        if not np.isfinite(root) or root.imag < -1e-9 * abs(root):
            continue
        again = [k for k in kept if abs(roots[k] - root) <= 1e-7 * (abs(root) + 1e-300)]
        if all(abs(starts[k] - starts[index]) <= 1e-3 * abs(root) for k in again):
            kept.append(int(index))
    found = roots[kept]
    on_real_axis = np.abs(found.imag) <= 1e-12 * np.abs(found)
    return np.where(on_real_axis, found.real, found)


def _count(loop: OpenLoop, roots: Complexes) -> Count:
    error = root_error(loop, roots)
    if np.any(np.abs(roots.real) <= error):
        return Count(None, reason="a root lies on the axis within the precision of the numbers")
    right = roots[roots.real > 0]
    return Count(_with_conjugates(right))


def _with_conjugates(roots: Complexes) -> int:
    return int(len(roots) + np.count_nonzero(roots.imag > 0))


def _verified(loop: OpenLoop, roots: Complexes) -> tuple[Complexes, float]:
    """As many of the rightmost roots as the argument principle confirms to be all right of a line, and the line."""
    target = -2.6 / loop.dead_time
    keep = int(np.count_nonzero(roots.real > target))
    keep = min(max(keep, min(8, len(roots) - 1)), len(roots) - 1)
    for _ in range(4):
        keep = _last_before_gap(roots, keep)
        if keep <= 0:
            break
        line = float(0.5 * (roots.real[keep - 1] + roots.real[keep]))
        counted = count_right_of_axis(AxisResponse.of(loop.shifted(line)))
        if counted.roots == _with_conjugates(roots[:keep]):
            return roots[:keep], line
        keep = (2 * keep) // 3
    stable_side = roots[roots.real > 0]
    return stable_side, 0.0


def _last_before_gap(roots: Complexes, keep: int) -> int:
    while keep > 0 and roots.real[keep - 1] - roots.real[keep] < 1e-4 * abs(roots.real[keep]):
        keep -= 1
    return keep
