"""Route B: characteristic roots of the closed loop, dead time exact.

The infinitesimal generator of the closed loop as a delay system is discretised by Chebyshev collocation of
the delayed controller output [1]; its eigenvalues are starting points only, and each is polished by Newton on
D(s) + N(s)·e^(−sθ) itself. In the right half plane a root needs abs N/D ≥ 1, which bounds its frequency and
so the number of nodes that resolve all of them.

[1] D. Breda, S. Maset, R. Vermiglio, Pseudospectral differencing methods for characteristic roots of delay
    differential equations, SIAM J. Sci. Comput. 27 (2005) 482-495; Stability of Linear Delay Differential
    Equations, Springer 2015, chapter 5. From memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, Complexes, LoopAt, OpenLoop, Reals
from service.analysis.nyquist import Count, count_right_of_axis, rounding
from service.analysis.realisation import StateSpace

MAX_NODES = 320
"""Work bound: more nodes than this and the roots are not computed."""

FEWEST_NODES = 14

FEW_NODES = 40
"""So many nodes cost no more than the rest of a recomputation."""

LEVELS = (3.0, 1.5, 0.7, 0.2, 0.02)
"""How far below 1, in nepers, abs L is still resolved."""

NEPERS_OF_CHAIN = 5.0
"""Where ln abs L is beyond this, a root can only lie beside a zero or pole of L."""

CLUSTER = 1e-4
"""Roots nearer to each other than this, relatively, are taken for one multiple root where errors are told."""

MOST_STEPS = 12

FAR_LEFT, STEPS_FAR_LEFT = -12.0, 5
"""A start that is left of this, in units of 1/θ, after so many steps is the collocation's own and no root."""

NEWTON_DONE = 1e-12
"""A Newton step this small, relatively, leaves an error of its square; at a multiple root of its own size."""

FAR_ENOUGH = -0.3
"""Where every root right of this line, in units of 1/θ, is known, responses can be continued by residues."""


@dataclass(frozen=True, eq=False)
class CharacteristicRoots:
    """Roots on and above the real axis, rightmost first, complex, shape (m,), in the loop's own unit of time.

    `complete_right_of`: every root right of this line is in the list (counted there by the argument
    principle).
    Hidden roots are not included. `count` is this route's own count right of the axis.
    """

    roots: Complexes
    complete_right_of: float
    count: Count


def characteristic_roots(
    space: StateSpace | None, axis: AxisResponse, hidden_roots: Complexes, most_nodes: int = MAX_NODES
) -> CharacteristicRoots:
    """Polished roots of 1 + L from the state space of the closed loop, which holds the hidden ones too.

    Where more than `most_nodes` would be needed the roots are not computed.
    """
    loop = axis.loop
    if loop.dead_time > 0 and loop.high_frequency_magnitude >= 1.0:
        return _infinite_chain(loop)
    best: CharacteristicRoots | None = None
    for nodes in (count for count in _node_counts(axis) if count <= most_nodes):
        found = _with_nodes(space, loop, hidden_roots, nodes)
        if best is None or found.complete_right_of < best.complete_right_of:
            best = found
        if loop.dead_time == 0 or best.complete_right_of * loop.dead_time <= FAR_ENOUGH:
            break
    if best is None:
        reason = (
            "the dead time is too long against the loop's fastest gain crossover for the roots to be computed"
        )
        return CharacteristicRoots(np.empty(0, complex), math.inf, Count(None, reason=reason))
    return best


def _with_nodes(
    space: StateSpace | None, loop: OpenLoop, hidden_roots: Complexes, nodes: int
) -> CharacteristicRoots:
    starts = _starts(space, loop, nodes)
    if space is not None:
        starts = without_nearest(starts, hidden_roots)
    if loop.sign == 0:
        return _of_open_loop(loop, starts)
    roots = polished_roots(loop, starts[starts.imag >= 0])
    roots = roots[np.lexsort((np.abs(roots.imag), -roots.real))]
    if loop.dead_time == 0:
        return CharacteristicRoots(roots, -math.inf, root_count(loop, roots))
    count = root_count(loop, roots)
    roots = roots[np.abs(roots.imag) * loop.dead_time <= _resolved(nodes)]
    if count.roots is None:
        return CharacteristicRoots(roots, math.inf, count)
    kept, line = _verified(loop, roots)
    return CharacteristicRoots(kept, line, count)


def _of_open_loop(loop: OpenLoop, eigenvalues: Complexes) -> CharacteristicRoots:
    """A gain of 0 leaves the poles; the eigenvalues say for themselves how many of them lie right of the
    axis.
    """
    poles = loop.poles[loop.poles.imag >= 0]
    poles = poles[np.lexsort((np.abs(poles.imag), -poles.real))]
    on_axis = np.abs(eigenvalues.real) <= EPSILON ** (1 / 2) * np.abs(eigenvalues)
    if on_axis.any():
        count = Count(None, reason="the loop is open and has a root on the axis")
    else:
        count = Count(int(np.count_nonzero(eigenvalues.real > 0)))
    return CharacteristicRoots(poles, -math.inf, count)


def without_nearest(starts: Complexes, hidden_roots: Complexes) -> Complexes:
    """The starts less, for each hidden root, the one that lies nearest to it: no root of 1 + L is there."""
    for root in hidden_roots[: len(starts)]:
        starts = np.delete(starts, int(np.argmin(np.abs(starts - root))))
    return starts


def root_error(loop: OpenLoop, roots: Complexes, there: LoopAt) -> Reals:
    """How far rounding may move each root, shape of `roots`; `there` is the loop at them.

    A root of multiplicity m moves by the m-th root of what a simple one moves by, relatively.
    """
    value, slope, of_denominator = there
    derivative = (1 + value) * of_denominator + value * slope
    relative = rounding(loop, np.abs(roots))
    error = relative * (1 + np.abs(value)) / np.abs(derivative)
    every = np.concatenate([roots, np.conj(roots[roots.imag > 0])])
    near = np.abs(every[None, :] - roots[:, None]) <= CLUSTER * np.abs(roots[:, None])
    multiplicity = near.sum(axis=1)
    of_cluster = 4.0 * relative ** (1.0 / multiplicity) * np.abs(roots)
    return np.asarray(np.where((multiplicity > 1) | ~np.isfinite(error), of_cluster, error))


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


def _node_counts(axis: AxisResponse) -> list[int]:
    """Numbers of nodes to try, few first; each resolves all roots for which abs L is above some level.

    Empty where even the roots right of the axis would need more nodes than the bound allows.
    """
    if axis.loop.dead_time == 0 or axis.loop.sign == 0:
        return [FEWEST_NODES]
    counts = []
    for level in (*LEVELS, *_level_of_neutral(axis.loop)):
        above = axis.omega[axis.log_response.real >= -level]
        highest = float(above[-1]) if above.size else 0.0
        angle = highest * axis.loop.dead_time
        count = FEWEST_NODES + math.ceil(0.5 * angle + 3.0 * angle ** (1 / 3))
        # a loop that does not roll off is above a low level for ever
        if not (above.size and above[-1] == axis.omega[-1]) and count <= MAX_NODES:
            counts.append(count)
    needed = [count for count in sorted(set(counts)) if count > FEW_NODES]
    cheap = [count for count in counts if count <= FEW_NODES]
    return ([max(cheap)] if cheap else []) + needed


def _level_of_neutral(loop: OpenLoop) -> list[float]:
    """Between 1 and abs L(∞), however near the two are: from some frequency on abs L stays below it."""
    magnitude = loop.high_frequency_magnitude
    return [-0.5 * math.log(magnitude)] if 0.0 < magnitude < 1.0 else []


def _resolved(nodes: int) -> float:
    """Up to which angle ωθ so many nodes resolve e^(jωt) over one dead time: π nodes a turn, and a fringe."""
    return float(2.0 * (nodes - 3.0 * nodes ** (1 / 3)))


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


def polished_roots(loop: OpenLoop, starts: Complexes) -> Complexes:
    """Newton on ln(−L) = 0, which is nearly linear along the chain of roots that dead time makes.

    `starts` on and above the real axis; a start off the axis stands for a pair. Without dead time every start
    is a root, so one from which Newton finds none of its own is kept as it is: at a multiple root it is right
    to half the digits.
    """
    at, step = starts.copy(), np.zeros_like(starts)
    real = starts.imag == 0
    for count in range(MOST_STEPS):
        step = _newton_step(at, loop.at(at))
        at = at + np.where(real, step.real, step)
        under_way = np.abs(step) > NEWTON_DONE * np.abs(at)
        if count >= STEPS_FAR_LEFT:
            under_way &= at.real * loop.dead_time > FAR_LEFT
        if not under_way.any():
            break
    settled = np.isfinite(at) & (np.abs(step) <= 1e-7 * np.abs(at))
    at = np.where(at.imag < 0, np.conj(at), at)
    kept = _first_found(starts, at, settled)
    if loop.dead_time == 0:
        lost = [index for index in range(len(starts)) if index not in kept]
        at[lost] = starts[lost]
        kept += lost
    found, pair = at[kept], ~real[kept]
    # a pair that has come to lie on the real axis is two real roots
    on_axis = np.abs(found.imag) <= 1e-12 * np.abs(found)
    found = np.where(on_axis, found.real, found)
    return np.concatenate([found, found[on_axis & pair]])


def _newton_step(at: Complexes, there: LoopAt) -> Complexes:
    """On ln(−L) where L is near 1 in magnitude, along the chain; on D·(1 + L) elsewhere, beside a pole of
    L.
    """
    value, slope, of_denominator = there
    closed = 1 + value
    # near a root 1 + L keeps the digits that the logarithm of nearly 1 would lose
    residual = np.where(np.abs(closed) < 1e-3, closed, -np.log(-value))
    on_product = closed / (closed * of_denominator + value * slope)
    step = np.where(np.abs(residual) < NEPERS_OF_CHAIN, residual / slope, -on_product)
    # a start on a pole of L, or far left where e^(−sθ) overflows, stays where it is
    step = np.where(np.isfinite(step), step, 0.0)
    largest = 0.5 * (np.abs(at) + 1.0)
    return np.asarray(step * (largest / np.maximum(np.abs(step), largest)))


def _first_found(starts: Complexes, roots: Complexes, settled: npt.NDArray[np.bool_]) -> list[int]:
    """Which roots stay when one that a second start found again is left out.

    True multiple roots have starts that lie together.
    """
    kept: list[int] = []
    order = np.argsort(np.abs(roots - starts), kind="stable").tolist()
    began, ended = starts.tolist(), roots.tolist()
    for index in order:
        root = ended[index]
        if not settled[index]:
            continue
        again = [k for k in kept if abs(ended[k] - root) <= 1e-7 * abs(root)]
        if all(abs(began[k] - began[index]) <= 1e-3 * abs(root) for k in again):
            kept.append(index)
    return kept


def root_count(loop: OpenLoop, roots: Complexes) -> Count:
    """How many roots lie right of the axis, conjugates included; `roots` on and above the real axis."""
    # where Newton has not settled its next step tells how far off the root may be
    there = loop.at(roots)
    error = np.maximum(root_error(loop, roots, there), 2.0 * np.abs(_newton_step(roots, there)))
    if np.any(np.abs(roots.real) <= error):
        return Count(None, reason="a root lies on the axis within the precision of the numbers")
    right = roots[roots.real > 0]
    return Count(_with_conjugates(right))


def _with_conjugates(roots: Complexes) -> int:
    return int(len(roots) + np.count_nonzero(roots.imag > 0))


def _verified(loop: OpenLoop, roots: Complexes) -> tuple[Complexes, float]:
    """As many of the rightmost roots as the argument principle confirms to be all right of a line, and the
    line.
    """
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
