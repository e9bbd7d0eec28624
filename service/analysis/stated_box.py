"""What holds for every member of the box as stated: distance from −1 and margins, searched for at once.

Between its ends the axis is covered by cells (`box_search`); what the ends allow is known by series
(`box_ends`).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from service.analysis.box import TURN, Bounds, UncertainLoop
from service.analysis.box_cells import Cells
from service.analysis.box_ends import End, Wanted, lower_end, upper_end
from service.analysis.box_quantities import (
    DISTANCE_SLACK,
    DelayMargin,
    Distance,
    GainMargin,
    Margin,
    PhaseMargin,
    crossings,
    least,
)
from service.analysis.box_search import Found, Search, first_cells, sweep
from service.analysis.results import Margins, Quantity
from service.analysis.tolerated_error import Start, crossovers_of

FLAT_SENSITIVITY = 1.002
"""A maximum sensitivity that is only approached at an end is met to this there."""

WIDEST_SLACK = 0.99
"""With this share of the distance left open its bracket is a hundredfold: a proof, and no more."""

CERTAIN = 1e-12

REACH = 1.5
"""A crossover of the loop as entered is followed to the box's corners by no more than this in ln ω."""


class Proven(NamedTuple):
    """Bounds on the safe side of the worst member's own values; margins are None past the bound on work.

    The distance of −1 from all of the box lies from `distance` to `distance_met`; 0: not shown to be stable.
    """

    distance: float
    distance_met: float
    log_gain_margin: Quantity
    phase_margin: Quantity
    delay_margin: Quantity

    @property
    def complete(self) -> bool:
        """All brackets are as narrow as they are meant to be."""
        wide = self.distance < (1.0 - 1.01 * DISTANCE_SLACK) * self.distance_met
        return not wide and None not in (self.log_gain_margin, self.phase_margin, self.delay_margin)


NOTHING = Proven(0.0, 0.0, None, None, None)


def prove(loop: UncertainLoop, nominal: Margins | None, unit_rad_s: float, scale: Start) -> Proven:
    """Search for all of it, and for the scale that is tolerated, over one set of cells.

    Raises EndsError where the ends of the axis are beyond float64.
    """
    bounds, wanted = loop.bounds(), _wanted(nominal)
    ends = _Ends(bounds, lower_end(loop, bounds, wanted), upper_end(loop, bounds, wanted))
    if not _no_roots_at_the_ends(ends):
        return NOTHING
    box = _StatedBox(loop, ends, nominal, unit_rad_s)
    cells = box.first_cells(scale)
    if cells is None:
        return NOTHING
    margins = box.margins()
    distance = box.distance(cells, [*margins, scale.search])
    sweep(loop, cells, [distance, *margins, *([] if scale.search.given_up else [scale.search])])
    if distance.meets_unstable and distance.best.place is not None:
        scale.meet(*distance.best.place)
    elif distance.given_up and not scale.search.meets_unstable:
        # past the bound on work a wide bracket is better than none
        distance = box.distance(cells, [distance], WIDEST_SLACK)
        sweep(loop, cells, [distance])
    if distance.given_up or distance.meets_unstable:
        return NOTHING
    told = [None if each.given_up else _told(each.proven) for each in margins]
    if box.delay_margin_vanishes:
        told[-1] = 0.0
    return Proven(distance.proven, distance.best.value, *told)


def _told(value: float) -> Quantity:
    return value if math.isfinite(value) else "unbounded"


@dataclass(frozen=True, slots=True)
class _Ends:
    bounds: Bounds
    low: End
    high: End


def _wanted(margins: Margins | None) -> Wanted:
    """How far out the ends lie: nothing in them can be worse than the loop as entered is."""
    sensitivity, log_gain_margin = FLAT_SENSITIVITY, 0.0
    if margins is not None:
        if isinstance(margins.max_sensitivity, float):
            sensitivity = margins.max_sensitivity
        if isinstance(margins.gain_margin, float):
            log_gain_margin = math.log(margins.gain_margin)
    small = math.log1p(-1.0 / max(sensitivity, FLAT_SENSITIVITY))
    return Wanted(log_small=min(small, -log_gain_margin), log_large=math.log1p(1.0 / sensitivity))


def _no_roots_at_the_ends(ends: _Ends) -> bool:
    """No member has a root at the origin, or roots that come through infinity."""
    high = ends.high
    if high.turns and (high.order < 0 or (high.order == 0 and _largest(high) >= 1.0 - CERTAIN)):
        return False
    limits = [end.value for end in (ends.low, high) if end.order == 0]
    return not any(low <= -1.0 + CERTAIN and high >= -1.0 - CERTAIN for low, high in limits)


def _largest(end: End) -> float:
    return max(abs(end.value[0]), abs(end.value[1]))


def _smallest(end: End) -> float:
    return min(abs(end.value[0]), abs(end.value[1]))


def _distance_in(end: End, *, grows: bool) -> tuple[float, float]:
    """(A bound below abs 1 + L in an end, what is attained in it or approached)."""
    low, high = end.log_magnitude
    if end.order != 0:
        return (math.expm1(low), math.inf) if grows else (-math.expm1(high), 1.0)
    if end.turns:
        return -math.expm1(high), 1.0 - _largest(end)
    least = min(abs(1.0 + value) for value in end.value)
    error = math.expm1(end.angle_error + end.log_error)
    return least - _largest(end) * error, least


@dataclass(frozen=True, eq=False)
class _StatedBox:
    """The searches over the box as stated, each with what is known before it begins."""

    loop: UncertainLoop
    ends: _Ends
    nominal: Margins | None
    unit_rad_s: float

    def first_cells(self, scale: Start) -> Cells | None:
        """Cells for all of the searches; None: too many. The scale is given up where its box alone is too
        wide.
        """
        bounds = self.ends.bounds
        omega = self.ends.low.omega, self.far.omega
        both = min(omega[0], scale.search.omega[0]), max(omega[1], scale.search.omega[1])
        cells = first_cells(self.loop, bounds, both, scale.bounds)
        if cells is None:
            scale.search.given_up = True
            cells = first_cells(self.loop, bounds, omega)
        return cells

    @property
    def omega(self) -> tuple[float, float]:
        """Between the ends."""
        return self.ends.low.omega, self.ends.high.omega

    def _of_nominal(self, name: str) -> float:
        """A margin of the loop as entered, which is a member; inf where it has none."""
        margin = None if self.nominal is None else getattr(self.nominal, name)
        return margin if isinstance(margin, float) else math.inf

    def distance(self, cells: Cells, others: list[Search], share: float = DISTANCE_SLACK) -> Search:
        """The distance of −1 from all of the box; the worst place of another search may be the nearest."""
        low = _distance_in(self.ends.low, grows=self.ends.low.order > 0)
        high = _distance_in(self.ends.high, grows=self.ends.high.order < 0)
        quantity = Distance(self.ends.bounds, share)
        sensitivity = self._of_nominal("max_sensitivity")
        found = [
            Found(min(low[1], high[1])),
            Found(1.0 / sensitivity if math.isfinite(sensitivity) else math.inf),
        ]
        if places := [each.best.place for each in others if each.best.place is not None]:
            w, v = np.array(places).T
            found.append(least(quantity.values(*self.loop.at(w, v)[:2], np.exp(w - v), v), w, v))
        search = Search(quantity, self.omega, min(found, key=_value), min(low[0], high[0]))
        search.improve(self.loop, cells)
        return search

    def margins(self) -> list[Search]:
        """Gain, phase and delay margin."""
        low, high = self.ends.low, self.ends.high
        gain, phase = list(self._gain_margin_in_ends()), [_phase_margin_in(low), _phase_margin_in(high)]
        delay = math.inf
        if low.order == 0 and low.log_magnitude[0] <= 0 <= low.log_magnitude[1]:
            delay = low.distance_of_angle / low.omega
        bounds = self.ends.bounds
        quantities = [GainMargin(bounds), PhaseMargin(bounds), DelayMargin(bounds)]
        known = [
            min(math.log(self._of_nominal("gain_margin")), *(each[1] for each in gain)),
            min(math.radians(self._of_nominal("phase_margin_deg")), *(each[1] for each in phase)),
            self._of_nominal("delay_margin_s") * self.unit_rad_s,
        ]
        elsewhere = [min(each[0] for each in gain), min(each[0] for each in phase), delay]
        met = self._at_corners(quantities)
        highest = [self.far.omega, high.omega, high.omega]
        return [
            Search(quantity, (low.omega, omega), min(Found(value), at_corner, key=_value), proven)
            for quantity, omega, value, at_corner, proven in zip(
                quantities, highest, known, met, elsewhere, strict=True
            )
        ]

    def _gain_margin_in_ends(self) -> Iterator[tuple[float, float]]:
        low, high = self.ends.low, self.far
        yield _gain_margin_in(low, vanishes=low.order < 0)
        yield _gain_margin_in(high, vanishes=high.order > 0)

    @property
    def delay_margin_vanishes(self) -> bool:
        """A crossing that may lie beyond every frequency leaves no time at all."""
        high = self.ends.high
        return high.order < 0 or (high.order == 0 and high.log_magnitude[1] >= 0)

    def _at_corners(self, quantities: list[Margin]) -> list[Found]:
        """The least margins at corners of the box, found from the crossovers of the loop as entered."""
        rad_s = [] if self.nominal is None else crossovers_of(self.nominal)
        if not rad_s:
            return [Found(math.inf)] * len(quantities)
        bounds = self.ends.bounds
        shape = (2, 2, 2, len(rad_s))
        of_gain = np.array([True, False])[:, None, None, None]
        known = np.array([bounds.log_gain, bounds.dead_time])[:, :, None, None]
        v = np.array(bounds.log_time)[:, None]
        # the plant's own frequencies move with the time factor, the controller's do not
        w = np.log(np.array(rad_s) / self.unit_rad_s) + 0.5 * v
        every = np.zeros(shape)
        v, w, known = (v + every).ravel(), (w + every).ravel(), (known + every).ravel()
        of_gain = (of_gain | (every > 0)).ravel()
        w, x, y = crossings(self.loop, w, v, of_gain, known, np.full(w.shape, REACH))
        return [least(quantity.values(x, y, np.exp(w - v), v), w, v) for quantity in quantities]

    @cached_property
    def far(self) -> End:
        """The upper end so far out that it has no crossing nearer to 1 than one before it."""
        high, bounds = self.ends.high, self.ends.bounds
        if math.isfinite(self._of_nominal("gain_margin")) or not high.turns or high.order <= 0:
            return high
        # within one turn of the dead time past the end there is a crossing; abs L there is at least this
        omega = high.omega + (TURN + 2.0 * high.angle_error) / bounds.dead_time[1]
        grown = min(self.loop.growth_at_infinity * log for log in bounds.log_time)
        log = self.loop.log_gain + bounds.log_gain[0] + grown - high.order * math.log(omega) - high.log_error
        return upper_end(self.loop, bounds, Wanted(log_small=min(log, -CERTAIN), log_large=0.0))


def _value(found: Found) -> float:
    return found.value


def _gain_margin_in(end: End, *, vanishes: bool) -> tuple[float, float]:
    """(A bound below ln of the gain margin in an end, what is attained in it); inf: none."""
    if end.never_crosses or (end.order != 0 and not vanishes):
        return math.inf, math.inf
    if end.order != 0:
        return -end.log_magnitude[1], math.inf
    if not end.turns and _smallest(end) > 1.0:
        return math.inf, math.inf
    largest = _largest(end)
    exact = -math.log(largest) if largest > 0 else math.inf
    return exact - end.log_error, exact


def _phase_margin_in(end: End) -> tuple[float, float]:
    """(A bound below the phase margin in an end, what is attained in it) in rad; inf: none."""
    low, high = end.log_magnitude
    if end.order != 0 or low > 0 or high < 0:
        return math.inf, math.inf
    exact = end.distance_of_angle + end.angle_error if _smallest(end) <= 1.0 <= _largest(end) else math.inf
    return end.distance_of_angle, exact
