"""How far the stated uncertainty may be scaled before some member of the box is unstable.

In the box of scale r every factor f stands as f^r and the extra dead time as r times itself, so that r = 0 is
the loop as entered and r = 1 the box as stated. For one (w, v) a member with L(jω) = −1 needs one gain and
one of a row of dead times; the least r whose box holds it is exact, and it is minimised over (w, v) as in
`box_search`. Where gain or dead time are certain, they are conditions on (w, v) that Newton's method meets.
The corners of the box mostly come to the axis first, so that the search begins with theirs.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from service.analysis.box import TURN, Bounds, UncertainLoop
from service.analysis.box_cells import Rectangles
from service.analysis.box_ends import End, Wanted, lower_end, upper_end
from service.analysis.box_quantities import least, spread_out
from service.analysis.box_search import Found, Search
from service.analysis.box_sectors import Sector
from service.analysis.loop import Reals
from service.analysis.results import Interval, Margins, Quantity

LARGEST_SCALE = 10.0
"""Nothing is looked for beyond this scale; a loop that is stable up to it is told as without limit."""

SCALE_SLACK = 0.008
"""Relative width of the bracket."""

NO_CROSSING = Wanted(log_small=-1e-9, log_large=1e-9)

SHARES = np.array([-1.0, -0.5, 0.0, 0.5, 1.0])

STARTS = 3
"""So many gain and phase crossovers of the loop as entered are tried as a start."""

NEWTON_STEPS = 3

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

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return self.share * attained

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """The box of that scale."""
        bounds = self.loop.bounds(level)
        return Sector(bounds.log_gain, bounds.dead_time, bounds.log_time, omega)

    def attain(self, loop: UncertainLoop, places: Rectangles) -> Found:
        """The least scale at points of the cells, or beside them where a condition is met."""
        w, v = spread_out(places, SHARES, SHARES)
        if loop.conditions:
            w, v = _on_conditions(loop, w, v)
        return least(self.values(*loop.at(w, v)[:2], np.exp(w - v), v), w, v)

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """The least scale of a box with a member that has L(jω) = −1 at points."""
        return least_scales(self.loop, x, y, omega, v, near)[0]


@dataclass(frozen=True, eq=False)
class Start:
    """What is known of the scale before it is searched for.

    `bounds`: the box of the least scale met; `touching`: the member it was met with, where that is known.
    """

    loop: UncertainLoop
    search: Search
    bounds: Bounds
    touching: Touching | None

    def meet(self, w: float, v: float) -> None:
        """Take note of a point that another search has come upon."""
        at_w, at_v = np.array([w]), np.array([v])
        values = self.search.quantity.values(*self.loop.at(at_w, at_v)[:2], np.exp(at_w - at_v), at_v)
        self.search.best = min(self.search.best, least(values, at_w, at_v), key=lambda found: found.value)

    @property
    def tolerated(self) -> Tolerated:
        """The bracket after the search."""
        search = self.search
        touching = self.touching
        if search.best.place is not None:
            w, v = (np.array([coordinate]) for coordinate in search.best.place)
            _, log_gain, dead_time = least_scales(self.loop, *self.loop.at(w, v)[:2], np.exp(w - v), v)
            touching = Touching(float(log_gain[0]), search.best.place[1], float(dead_time[0]))
        return Tolerated(search.proven, search.best.value, touching)


def error_scale(loop: UncertainLoop, log_gain: Reals, log_time: Reals, dead_time: Reals) -> Reals:
    """The least r for which members with these factors lie in the box of scale r, shape of all."""
    more = dead_time - loop.dead_times.nominal
    scale = np.where(
        more >= 0,
        loop.dead_times.scale_above(np.maximum(more, 0.0)),
        loop.dead_times.scale_below(np.maximum(-more, 0.0)),
    )
    scale = np.maximum(scale, scale_of(log_gain, loop.log_gain_factor))
    return np.maximum(scale, scale_of(log_time, loop.log_time_factor))


def scale_of(log: Reals, logs: tuple[float, float]) -> Reals:
    """The least r for which `log` lies in r·`logs`; inf: for none."""
    low, high = logs
    above = log / high if high > 0 else np.where(log > 0, np.inf, 0.0)
    below = log / low if low < 0 else np.where(log < 0, np.inf, 0.0)
    return np.maximum(np.maximum(above, below), 0.0)


def least_scales(
    loop: UncertainLoop, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY
) -> tuple[Reals, Reals, Reals]:
    """(The least scale of a box with a member that has L(jω) = −1 at points, its ln k, its dead time).

    ln(−L) = x + jy for k = 1 and no dead time. A condition is met that is missed by no more than `near`.
    """
    log_gain = _exact(-x, 0.0, loop.log_gain_factor == (0.0, 0.0), near)
    nominal = loop.dead_times.nominal
    below = np.floor((y - omega * nominal) / TURN)
    scales, dead_times = [], []
    for multiple in (below, below + 1.0):
        angle = y - TURN * multiple - omega * nominal
        dead_time = nominal + _exact(angle, 0.0, not loop.dead_times.uncertain, near) / omega
        scale = error_scale(loop, log_gain, v, np.maximum(dead_time, 0.0))
        scales.append(np.where(dead_time >= 0, scale, np.inf))
        dead_times.append(dead_time)
    first = scales[0] <= scales[1]
    scale = np.where(first, scales[0], scales[1]) * (1.0 + NEARLY)
    return np.where(scale == scale, scale, np.inf), log_gain, np.where(first, *dead_times)


def _exact(values: Reals, exact: float, certain: bool, near: float) -> Reals:
    """The values; what is certain stands in place of those that are near it."""
    return np.where(np.abs(values - exact) <= near, exact, values) if certain else values


def _on_conditions(loop: UncertainLoop, w: Reals, v: Reals) -> tuple[Reals, Reals]:
    """Points near these at which a certain gain, or dead time, is the one that L(jω) = −1 needs."""
    moves_v = loop.log_time_factor != (0.0, 0.0)
    certain_gain, certain_time = loop.log_gain_factor == (0.0, 0.0), not loop.dead_times.uncertain
    nominal = loop.dead_times.nominal
    for _ in range(NEWTON_STEPS + 1):
        there, turned = loop.at(w, v), np.exp(w - v) * nominal
        angle = there.y - turned
        x, y = there.x, angle - TURN * np.rint(angle / TURN)
        x_w, x_v, y_w, y_v = there.x_w, there.x_v, there.y_w - turned, there.y_v + turned
        if certain_gain and certain_time and moves_v:
            # two conditions, two unknowns
            area = x_w * y_v - y_w * x_v
            step_w, step_v = (x * y_v - y * x_v) / area, (x_w * y - y_w * x) / area
        else:
            # one condition: the shortest way to it, since either direction alone may run along it
            missed, along_w, along_v = (x, x_w, x_v) if certain_gain else (y, y_w, y_v)
            along_v = along_v * moves_v
            square = along_w * along_w + along_v * along_v
            step_w, step_v = missed * along_w / square, missed * along_v / square
        w = w - np.clip(np.where(step_w == step_w, step_w, 0.0), -0.5, 0.5)
        v = v - np.clip(np.where(step_v == step_v, step_v, 0.0), -0.5, 0.5)
    return w, v


def start(loop: UncertainLoop, margins: Margins | None, unit_rad_s: float) -> Start:
    """Where the search for the scale begins, for a loop that is stable as entered, with its margins and unit
    of time.

    Raises EndsError where the ends of the axis are beyond float64.
    """
    nothing = LARGEST_SCALE / (1.0 - SCALE_SLACK)
    known, touching = min(_of_nominal_margins(loop, margins), (nothing, None), key=lambda pair: pair[0])
    best = min(Found(known), _of_corners(loop, margins, unit_rad_s), key=lambda found: found.value)
    bounds = loop.bounds(best.value)
    low, high = lower_end(loop, bounds, NO_CROSSING), upper_end(loop, bounds, NO_CROSSING)
    (low_proven, low_attained), (high_proven, high_attained) = _at_lower(loop, low), _at_upper(loop, high)
    if min(low_attained, high_attained) < best.value:
        best, touching = Found(min(low_attained, high_attained)), None
    elsewhere = min(low_proven, high_proven)
    search = Search(ErrorScale(loop), (low.omega, high.omega), best, elsewhere, 1.0, of_any_box=True)
    return Start(loop, search, bounds, touching)


def _of_corners(loop: UncertainLoop, margins: Margins | None, unit_rad_s: float) -> Found:
    """The least scale at which a corner of the box has a root on the axis, found from the loop's crossovers.

    Newton's method on L(jω) = −1 by ln ω and the scale together; a point that has not come to it counts for
    what it is.
    """
    rad_s = [] if margins is None else crossovers_of(margins)
    if not rad_s:
        return Found(math.inf)
    times = loop.dead_times
    corners = np.array(list(itertools.product(loop.log_gain_factor, loop.log_time_factor, (0, 1)))).T
    log_k, log_f, late = np.concatenate([corners] * len(rad_s), axis=1)
    log_theta, extra = np.where(late > 0, times.log_factor[1], times.log_factor[0]), late * times.extra
    u, scale = np.repeat(np.log(np.array(rad_s) / unit_rad_s), corners.shape[1]), np.zeros(len(log_k))
    multiple: Reals | None = None
    for _ in range(NEWTON_STEPS):
        omega, grown = np.exp(u), times.entered * np.exp(np.clip(scale * log_theta, -700.0, 700.0))
        dead_time = np.maximum(grown + scale * extra - times.reduction, 0.0)
        by_scale = np.where(dead_time > 0, grown * log_theta + extra, 0.0)
        there, turned = loop.at(u + scale * log_f, scale * log_f), omega * dead_time
        angle = there.y - turned
        multiple = np.rint(angle / TURN) if multiple is None else multiple
        x, y = there.x + scale * log_k, angle - TURN * multiple
        x_u, y_u = there.x_w, there.y_w - turned
        x_r, y_r = (there.x_w + there.x_v) * log_f + log_k, (there.y_w + there.y_v) * log_f - omega * by_scale
        area = x_u * y_r - y_u * x_r
        u = u - np.clip((x * y_r - y * x_r) / area, -1.0, 1.0)
        scale = np.clip(scale - (x_u * y - y_u * x) / area, 0.0, LARGEST_SCALE)
    v = scale * log_f
    return least(least_scales(loop, *loop.at(u + v, v)[:2], np.exp(u), v)[0], u + v, v)


def crossovers_of(margins: Margins) -> list[float]:
    """Gain and phase crossovers in rad/s of the loop as entered, no more than a start needs."""
    found = [each.rad_s for each in margins.gain_crossovers[:STARTS]]
    found += [each.rad_s for each in margins.phase_crossovers[:STARTS] if isinstance(each.rad_s, float)]
    return [omega for omega in found if omega > 0]


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
