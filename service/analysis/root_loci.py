"""Where the dominant characteristic roots go when the loop gain or the dead time is another, as data for a
figure.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import ClosedLoopParts, Complexes, OpenLoop
from service.analysis.realisation import StateSpace
from service.analysis.results import RootLoci, RootsAt
from service.analysis.roots import characteristic_roots

GAIN_FACTORS = tuple(np.geomspace(0.1, 10.0, 25).tolist())
DEAD_TIME_FACTORS = tuple(np.linspace(0.0, 3.0, 13).tolist())
ROOTS_SHOWN = 6

MOST_NODES = 64
"""Work bound: at a factor where the roots would need more nodes than this they are left out."""


def root_loci(parts: ClosedLoopParts, space: StateSpace | None) -> RootLoci:
    """The rightmost roots at each factor, rad/s, of a pair the one above the axis; none where they are not
    known.
    """
    by_gain = tuple(
        _roots_at(parts, None if space is None else _with_gain(space, factor), _loop(parts, factor), factor)
        for factor in GAIN_FACTORS
    )
    if parts.dead_time == 0:
        return RootLoci(gain=by_gain, dead_time=())
    by_dead_time = tuple(
        _roots_at(parts, space, replace(parts.loop, dead_time=parts.loop.dead_time * factor), factor)
        for factor in DEAD_TIME_FACTORS
    )
    return RootLoci(gain=by_gain, dead_time=by_dead_time)


def _loop(parts: ClosedLoopParts, factor: float) -> OpenLoop:
    return parts.loop if parts.loop.sign == 0 else parts.loop.with_gain_factor(factor)


def _with_gain(space: StateSpace, factor: float) -> StateSpace:
    return replace(space, c_u=space.c_u * factor, d_u=space.d_u * factor)


def _roots_at(parts: ClosedLoopParts, space: StateSpace | None, loop: OpenLoop, factor: float) -> RootsAt:
    try:
        found = characteristic_roots(space, AxisResponse.of(loop), parts.hidden_roots, MOST_NODES)
    except (ArithmeticError, np.linalg.LinAlgError):
        return RootsAt(factor=factor, roots=())
    roots: Complexes = np.concatenate([found.roots, parts.hidden_roots[parts.hidden_roots.imag >= 0]])
    roots = roots[np.argsort(-roots.real, kind="stable")][:ROOTS_SHOWN] * parts.unit_rad_s
    roots = roots[np.isfinite(roots)]
    return RootsAt(factor=factor, roots=tuple((root.real, root.imag) for root in roots.tolist()))
