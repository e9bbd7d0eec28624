"""Route B at the scans: eigenvalues of the closed loop's matrix, each polished on 1 + L itself.

Where the dead time is many scans long the past outputs are carried as a polynomial through Chebyshev points
of the delay line, which is exact for what changes slowly against the distance of the points; a root outside
the unit circle needs abs L ≥ 1, which bounds its frequency and so the number of points.

Source of the latter: D. Breda, S. Maset, R. Vermiglio, Stability of Linear Delay Differential Equations
(Springer 2015), chapter 6 (solution operator), here for steps of a scan. From memory.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from service.analysis import chebyshev
from service.analysis.frequency import AxisResponse
from service.analysis.loop import Complexes, OpenLoop, Reals
from service.analysis.nyquist import Count
from service.analysis.roots import LEVELS, CharacteristicRoots, polished_roots, root_count, without_nearest
from service.analysis.sampled_states import INPUTS, NEW, OLD, SampledStates

WHOLE_LINE = 60
"""So many past outputs cost little when each is carried for itself."""

LONGEST_WHOLE_LINE = 400
"""Work bound: a longer line is carried by points or not at all."""

MOST_AMPLIFIED = 16.0
"""ln of how much interpolation may amplify rounding; the starts that come of it are polished."""

FEWEST_POINTS, MOST_POINTS = 14, 400

WELL_INSIDE = 0.3
"""Eigenvalues of smaller magnitude say nothing: those of a chain of delays are all 0 but for rounding."""

UNRESOLVED = "the dead time is too many scans long against the loop's crossovers for the roots to be computed"


def sampled_roots(states: SampledStates, axis: AxisResponse, hidden_roots: Complexes) -> CharacteristicRoots:
    """Roots of 1 + L in w, on and above the real axis, rightmost first. `axis`: that of the loop in w.

    All roots with abs z ≥ `WELL_INSIDE` are among them; of a loop that has none the outermost that it has.
    """
    loop, line = axis.loop, states.plant.held_scans
    if line > WHOLE_LINE:
        for level in LEVELS:
            points = _points_needed(axis, line, level)
            if points is not None and (found := _from_points(states, loop, points, level)) is not None:
                return found
        if line > LONGEST_WHOLE_LINE:
            return CharacteristicRoots(np.empty(0, complex), math.inf, Count(None, reason=UNRESOLVED))
    z = np.linalg.eigvals(states.closed()[0]).astype(complex)
    roots = _polished(loop, without_nearest(z, (1.0 + hidden_roots) / (1.0 - hidden_roots)))
    return CharacteristicRoots(roots, 0.0, root_count(loop, roots))


def _from_points(
    states: SampledStates, loop: OpenLoop, points: int, level: float
) -> CharacteristicRoots | None:
    """The roots that so many points resolve; None where the outermost may not be among them."""
    line = states.plant.held_scans
    roots = _polished(loop, np.linalg.eigvals(compressed(states, points)).astype(complex))
    roots = roots[resolved(np.angle((1.0 + roots) / (1.0 - roots)), line, points)]
    # a root that is not resolved lies where abs L is below the level, so inside this circle
    outside = np.log(np.abs((1.0 + roots) / (1.0 - roots))) > -level / line
    if not outside.any():
        return None
    return CharacteristicRoots(roots[outside], 0.0, root_count(loop, roots))


def _polished(loop: OpenLoop, z: Complexes) -> Complexes:
    outer = z[np.abs(z) >= WELL_INSIDE]
    if not outer.size:
        outer = z[np.argsort(-np.abs(z))][:4]
    w = (outer - 1.0) / (outer + 1.0)
    roots = polished_roots(loop, w[np.isfinite(w) & (w.imag >= 0)])
    return roots[np.lexsort((np.abs(roots.imag), -np.abs((1.0 + roots) / (1.0 - roots))))]


def resolved(angle: Reals, line: int, points: int) -> npt.NDArray[np.bool_]:
    """Whether so many points resolve a root at this angle of z, shape of `angle`; others are not to be
    trusted.
    """
    return np.asarray(np.abs(angle) * line <= 2.0 * (points - 3.0 * points ** (1 / 3)))


def _points_needed(axis: AxisResponse, line: int, level: float) -> int | None:
    """Points that resolve every root for which abs L is above the level; None where they are too many."""
    above = axis.omega[axis.log_response.real >= -level]
    highest = 2.0 * math.atan(float(above[-1])) if above.size else 0.0
    if above.size and above[-1] == axis.omega[-1]:
        highest = math.pi
    return points_for(highest, line)


def points_for(highest: float, line: int) -> int | None:
    """Points that resolve every root up to the angle `highest` of z; None where they are too many."""
    angle = highest * line
    points = FEWEST_POINTS + math.ceil(0.5 * angle + 3.0 * angle ** (1 / 3))
    return points if points <= MOST_POINTS and 2.0 * points / math.sqrt(line) <= MOST_AMPLIFIED else None


def compressed(states: SampledStates, points: int) -> Reals:
    """The closed loop's matrix, square, the past outputs carried by `points` points; (m + points) rows."""
    m, line, k = states.order, states.plant.held_scans, states.plant.whole_scans
    # place j is w[n−j]: the present output first, then points from the last scan to the far end
    places = np.concatenate([[0.0], 1.0 + (line - 1.0) * chebyshev.points(points)])
    size = m + points
    values = np.zeros((points + 1, size))
    values[1:, m:] = np.eye(points)
    own = np.zeros((INPUTS, size))
    if line > k:
        own[OLD] = values[-1]
    own[NEW] = _interpolation(places, np.array([float(k)]))[0, 1:] @ values[1:]
    # the measured value is read before the present output is put out, so the latter plays no part in itself
    values[0, :m] = states.output[:m]
    values[0] += states.output[m:] @ own
    own[NEW] = _interpolation(places, np.array([float(k)]))[0] @ values
    matrix = np.zeros((size, size))
    matrix[:m, :m] = states.forward[:, :m]
    matrix[:m] += states.forward[:, m:] @ own
    # a scan later what stood at j − 1 stands at j
    matrix[m:] = _interpolation(places, places[1:] - 1.0) @ values
    return matrix


def _interpolation(places: Reals, at: Reals) -> Reals:
    """Matrix from values at `places` to values at `at`, by the barycentric formula; shape (len(at),
    len(places)).
    """
    distance = places[:, None] - places + np.eye(len(places))
    logs = -np.log(np.abs(distance)).sum(axis=1)
    weights = np.prod(np.sign(distance), axis=1) * np.exp(logs - logs.max())
    difference = at[:, None] - places
    exact = np.abs(difference) < 1e-12
    terms = weights / np.where(exact, 1.0, difference)
    matrix = terms / terms.sum(axis=1, keepdims=True)
    hit = exact.any(axis=1)
    matrix[hit] = exact[hit]
    return np.asarray(matrix)
