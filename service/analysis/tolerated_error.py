"""How far the stated uncertainty may be scaled before some member of the box is unstable.

In the box of scale r every factor f stands as f^r and the extra dead time as r times itself, so that r = 0 is
the loop as entered and r = 1 the box as stated. For one (w, v) a member with L(jω) = −1 needs one gain and
one of a row of dead times; the least r whose box holds it is exact, and it is minimised over (w, v) as in
`box_search`. Where gain or dead time are certain, they are conditions on (w, v) that Newton's method meets.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from service.analysis.box import TURN, Cells, Corners, UncertainLoop
from service.analysis.box_ends import End, Wanted, lower_end, upper_end
from service.analysis.box_quantities import error_scale, least, scale_of, spread_out
from service.analysis.box_search import Found, Minimum, WorkBoundError, first_cells, minimum
from service.analysis.loop import Complexes, Reals
from service.analysis.results import Interval, Margins, Quantity

LARGEST_SCALE = 10.0
"""Nothing is looked for beyond this scale; a loop that is stable up to it is told as without limit."""

SCALE_SLACK = 0.008
"""Relative width of the bracket."""

FINE_SLACK = 1e-6
"""The same where the bracket would hold 1."""

NO_CROSSING = Wanted(log_small=-1e-9, log_large=1e-9)

SHARES = np.array([-1.0, -0.5, 0.0, 0.5, 1.0])
FINE_SHARES = np.linspace(-1.0, 1.0, 17)

STARTS = 3
"""So many gain and phase crossovers of the loop as entered are tried as a start."""

NEWTON_STEPS = 4

NEARLY = 1e-9
"""A condition that is missed by no more than this (nepers, rad) is met."""


class Touching(NamedTuple):
    """A member with a root on the axis: ln of its gain and time factor, dead time in the loop's own unit."""

    log_gain: float
    log_time: float
    dead_time: float


@dataclass(frozen=True, slots=True)
class Tolerated:
    """The largest scale at which the box stays stable lies from `proven` to `attained`.

    `touching` is a member of the box of scale `attained` with a root on the axis, None where it is not known
    (a root comes through an end of the axis, or nothing was found).
    """

    proven: float
    attained: float
    touching: Touching | None

    @property
    def too_wide(self) -> bool:
        """The bracket is wider than it is meant to be: the search has met its bound on work."""
        return self.proven < min((1.0 - 1.01 * SCALE_SLACK) * self.attained, LARGEST_SCALE * (1.0 - NEARLY))

    @property
    def interval(self) -> Interval | None:
        """The bracket as it is told; None where nothing was proven."""
        if not (self.proven > 0 or self.attained == 0):
            return None
        limit: Quantity = self.attained if self.attained <= LARGEST_SCALE else "unbounded"
        return Interval(at_least=min(self.proven, LARGEST_SCALE), at_most=limit)


@dataclass(frozen=True, eq=False)
class ErrorScale:
    """The least scale of the box at which a member has a root on the axis."""

    loop: UncertainLoop
    share: float = SCALE_SLACK
    shares: Reals = field(default_factory=lambda: SHARES)

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return self.share * attained

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """Bounds over cells."""
        loop, dead_time = self.loop, self.loop.dead_times.nominal
        low_x, high_x = cells.log_magnitude
        scale = scale_of(np.clip(0.0, -high_x, -low_x), loop.log_gain_factor)
        nearest_v = np.clip(0.0, cells.v - cells.half_v, cells.v + cells.half_v)
        scale = np.maximum(scale, scale_of(nearest_v, loop.log_time_factor))
        low, high = cells.phase(dead_time)
        below = np.floor(low / TURN)
        more = np.maximum(low - TURN * below, 0.0) / cells.omega_highest
        less = np.maximum(TURN * (below + 1.0) - high, 0.0) / cells.omega_highest
        by_dead_time = np.minimum(loop.dead_times.scale_above(more), loop.dead_times.scale_below(less))
        scale = np.maximum(scale, np.where(TURN * (below + 1.0) <= high, 0.0, by_dead_time))
        turned = cells.omega * dead_time
        cost_w = (np.abs(cells.slope_w - 1j * turned) * cells.half_w) ** 2
        cost_v = ((np.abs(cells.slope_v + 1j * turned) + 1.0) * cells.half_v) ** 2
        return scale * (1.0 - 1e-12), cost_w, cost_v, None

    def attain(self, loop: UncertainLoop, corners: Corners) -> Found:
        """The least scale at points of the cells, or beside them where a condition is met."""
        w, v = spread_out(corners, self.shares, SHARES)
        if loop.conditions:
            w, v = _on_conditions(loop, w, v)
        return least(least_scales(loop, w, v)[0], w, v)


def least_scales(loop: UncertainLoop, w: Reals, v: Reals) -> tuple[Reals, Reals, Reals]:
    """(The least scale of a box with a member that has L(jω) = −1 at (w, v), its ln k, its dead time)."""
    value, omega = loop.at(w, v)[0], np.exp(w - v)
    log_gain = _exact(-value.real, 0.0, loop.log_gain_factor == (0.0, 0.0))
    nominal = loop.dead_times.nominal
    below = np.floor((value.imag - omega * nominal) / TURN)
    scales, dead_times = [], []
    for multiple in (below, below + 1.0):
        angle = _exact(value.imag - TURN * multiple - omega * nominal, 0.0, not loop.dead_times.uncertain)
        dead_time = nominal + angle / omega
        scale = error_scale(loop, log_gain, v, np.maximum(dead_time, 0.0))
        scales.append(np.where(dead_time >= 0, scale, np.inf))
        dead_times.append(dead_time)
    first = scales[0] <= scales[1]
    scale = np.where(first, scales[0], scales[1]) * (1.0 + NEARLY)
    return np.where(scale == scale, scale, np.inf), log_gain, np.where(first, *dead_times)


def _exact(values: Reals, exact: float, certain: bool) -> Reals:
    """The values, with the exact one in place of those that miss it by rounding only."""
    return np.where(np.abs(values - exact) <= NEARLY, exact, values) if certain else values


def _on_conditions(loop: UncertainLoop, w: Reals, v: Reals) -> tuple[Reals, Reals]:
    """Points near these at which a certain gain, or dead time, is the one that L(jω) = −1 needs."""
    moves_v = loop.log_time_factor != (0.0, 0.0)
    certain_gain, certain_time = loop.log_gain_factor == (0.0, 0.0), not loop.dead_times.uncertain
    nominal = loop.dead_times.nominal
    for _ in range(NEWTON_STEPS):
        value, slope_w, slope_v = loop.at(w, v)
        omega = np.exp(w - v)
        angle = value.imag - omega * nominal
        error: Complexes = value.real + 1j * (angle - TURN * np.rint(angle / TURN))
        by_w, by_v = slope_w - 1j * omega * nominal, slope_v + 1j * omega * nominal
        if certain_gain and certain_time and moves_v:
            # two conditions, two unknowns
            area = by_w.real * by_v.imag - by_w.imag * by_v.real
            step_w = (error.real * by_v.imag - error.imag * by_v.real) / area
            step_v = (by_w.real * error.imag - by_w.imag * error.real) / area
        else:
            # one condition: the shortest way to it, since either direction alone may run along it
            missed = error.real if certain_gain else error.imag
            along_w = by_w.real if certain_gain else by_w.imag
            along_v = (by_v.real if certain_gain else by_v.imag) * moves_v
            square = along_w * along_w + along_v * along_v
            step_w, step_v = missed * along_w / square, missed * along_v / square
        w = w - np.clip(np.where(step_w == step_w, step_w, 0.0), -0.5, 0.5)
        v = v - np.clip(np.where(step_v == step_v, step_v, 0.0), -0.5, 0.5)
    return w, v


def tolerated_error(loop: UncertainLoop, margins: Margins | None, unit_rad_s: float) -> Tolerated:
    """The bracket for a loop that is stable as entered, with its margins and unit of time.

    Raises EndsError where the ends of the axis are beyond float64.
    """
    nothing = LARGEST_SCALE / (1.0 - SCALE_SLACK)
    known, touching = min(_of_nominal_margins(loop, margins), (nothing, None), key=lambda pair: pair[0])
    place: tuple[float, float] | None = None
    if margins is not None:
        met = _near_crossovers(loop, margins, unit_rad_s, known)
        if met.value < known:
            known, place = met
    bounds = loop.bounds(known)
    low, high = lower_end(loop, bounds, NO_CROSSING), upper_end(loop, bounds, NO_CROSSING)
    (low_proven, low_attained), (high_proven, high_attained) = _at_lower(loop, low), _at_upper(loop, high)
    if min(low_attained, high_attained) < known:
        known, touching, place = min(low_attained, high_attained), None, None
    if known == 0:
        return Tolerated(0.0, 0.0, None)
    elsewhere = min(low_proven, high_proven)
    for share in (SCALE_SLACK, FINE_SLACK):
        try:
            cells = first_cells(loop, bounds, low.omega, high.omega)
            found = minimum(ErrorScale(loop, share), cells, known, elsewhere)
        except WorkBoundError as error:
            found = Minimum(error.known.proven, min(error.known.attained, known), error.known.place)
        place, known = found.place or place, found.attained
        # the box as stated is worth knowing on which side of it the bracket lies
        if not found.proven <= 1.0 < found.attained:
            break
    if place is not None:
        w, v = (np.array([coordinate]) for coordinate in place)
        _, log_gain, dead_time = least_scales(loop, w, v)
        touching = Touching(float(log_gain[0]), place[1], float(dead_time[0]))
    return Tolerated(found.proven, found.attained, touching)


def _near_crossovers(loop: UncertainLoop, margins: Margins, unit_rad_s: float, known: float) -> Found:
    """A scale that is attained near the crossovers of the loop as entered: a start that spares cells."""
    found = [each.rad_s for each in margins.gain_crossovers[:STARTS]]
    found += [each.rad_s for each in margins.phase_crossovers[:STARTS] if isinstance(each.rad_s, float)]
    rad_s = [omega for omega in found if omega > 0]
    if not rad_s:
        return Found(math.inf)
    w = np.log(np.array(rad_s) / unit_rad_s)
    low, high = loop.bounds(known).log_time
    corners = Corners(
        w, np.full(len(w), 0.5 * (low + high)), np.full(len(w), 1.0), np.full(len(w), 0.5 * (high - low))
    )
    return ErrorScale(loop, shares=FINE_SHARES).attain(loop, corners)


def _of_nominal_margins(loop: UncertainLoop, margins: Margins | None) -> tuple[float, Touching | None]:
    """A scale at which a member that differs in gain alone is on the boundary, and that member."""
    found: list[tuple[float, Touching | None]] = [(math.inf, None)]
    if margins is not None:
        for margin in (margins.gain_margin, margins.gain_reduction_margin):
            if isinstance(margin, float) and margin > 0:
                log = math.log(margin)
                scale = float(scale_of(np.array([log]), loop.log_gain_factor)[0]) * (1.0 + NEARLY)
                found.append((scale, Touching(log, 0.0, loop.dead_times.nominal)))
    return min(found, key=lambda pair: pair[0])


def _at_lower(loop: UncertainLoop, end: End) -> tuple[float, float]:
    """(What is proven, what is attained) of the scale in the lower end; inf: nothing."""
    if end.order != 0 or end.never_crosses:
        return math.inf, math.inf
    return _needed(-loop.log_origin_coefficient, end.log_error, loop.log_gain_factor)


def _at_upper(loop: UncertainLoop, end: End) -> tuple[float, float]:
    if end.order > 0 or (end.never_crosses and not end.turns):
        return math.inf, math.inf
    if end.turns and (end.order < 0 or loop.log_gain >= 0):
        return 0.0, 0.0
    if end.order < 0:
        return math.inf, math.inf
    grown = sorted(loop.growth_at_infinity * log for log in loop.log_time_factor)
    logs = (loop.log_gain_factor[0] + grown[0], loop.log_gain_factor[1] + grown[1])
    return _needed(-loop.log_gain, end.log_error, logs)


def _needed(log: float, error: float, logs: tuple[float, float]) -> tuple[float, float]:
    near = math.copysign(max(0.0, abs(log) - error), log)
    proven, attained = scale_of(np.array([near, log]), logs)
    return float(proven), float(attained) * (1.0 + NEARLY)
