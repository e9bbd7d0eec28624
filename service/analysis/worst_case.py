"""What holds for every model in the box of the stated uncertainty, proven by zero exclusion.

A loop that is stable as entered stays so over a connected box as long as no characteristic root comes to the
axis: 1 + L(jω) ≠ 0 for every member and ω > 0, and none arrives through the origin or through infinity. Plant
poles p/f never cross the axis while f > 0; a factor that a member's controller would cancel is not cancelled
here, so a pole on the axis counts as abs L without bound and a zero on it as 0.

The continuous loop is analysed, with or without a scan, and the answer says so.

Source: the zero exclusion principle as in B. R. Barmish, New Tools for Robustness of Linear Systems (1994),
chapter 7; for quasi-polynomials S. P. Bhattacharyya, H. Chapellat, L. H. Keel, Robust Control: The Parametric
Approach (1995), chapter 8. From memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from service.analysis.box import TURN, Bounds, Cells, UncertainLoop, member_of, uncertain_loop
from service.analysis.box_ends import End, EndsError, Wanted, lower_end, upper_end
from service.analysis.box_quantities import (
    DISTANCE_SLACK,
    DelayMargin,
    Distance,
    GainMargin,
    PhaseMargin,
)
from service.analysis.box_search import Minimum, Quantity, WorkBoundError, first_cells, minimum
from service.analysis.controller import Controller
from service.analysis.errors import FieldError
from service.analysis.frequency import AxisResponse
from service.analysis.loop import ClosedLoopParts, form_loop
from service.analysis.plant import PlantModel, Ranges, Uncertainty
from service.analysis.realisation import realise
from service.analysis.results import Analysis, BoxMember, Interval, Margins, WorstCase
from service.analysis.results import Quantity as Told
from service.analysis.stability import decide
from service.analysis.tolerated_error import LARGEST_SCALE, Tolerated, Touching, tolerated_error

NOTE_TOO_MUCH_WORK = "worst_case_too_much_work"
"""The box, the dead time or a resonance makes more cells than the stated bound on work."""

NOTE_NUMBERS = "worst_case_numbers_out_of_range"
"""The box reaches numbers that leave float64."""

NOTE_NOT_CONFIRMED = "worst_case_not_confirmed"
"""A member has a root on the axis, but none was found that both routes call unstable."""

FLAT_SENSITIVITY = 1.002
"""A maximum sensitivity that is only approached at an end is met to this there."""

WIDEST_SLACK = 0.99
"""With this share of the distance left open its bracket is a hundredfold: a proof, and no more."""

STEPS_BEYOND = (1.0, 0.3, 0.1, 0.03, 0.01, 0.002)
"""How far beyond a member with a root on the axis unstable ones are looked for, relatively."""

BOUNDARY = 1e-7
"""A box whose edge is so near to a member with a root on the axis is not told from one that holds it."""

CERTAIN = 1e-12


def worst_case(
    parts: ClosedLoopParts,
    plant_model: PlantModel,
    controller: Controller,
    ranges: Ranges | None,
    nominal: Analysis,
) -> WorstCase | None:
    """The worst case over the uncertainty of the plant; None where it states none, or its kind has no box.

    `nominal` is the analysis of the loop as entered, continuous.
    """
    if plant_model.uncertainty is None:
        return None
    loop = uncertain_loop(parts, plant_model, plant_model.uncertainty)
    if loop is None:
        return None
    verdict = nominal.stability.verdict
    if verdict == "unstable":
        entered = BoxMember(gain=1.0, time_constants=1.0, dead_time=1.0)
        return _nothing(False, counterexample=entered)
    if verdict == "undecided":
        return _nothing(None)
    if loop.sign == 0:
        return _open()
    trial = _Trial(parts, plant_model, controller, ranges, loop)
    try:
        return _of_stable(loop, nominal.margins, trial)
    except (ArithmeticError, EndsError):
        return _nothing(None, notes=(NOTE_NUMBERS,))


def _of_stable(loop: UncertainLoop, margins: Margins | None, trial: _Trial) -> WorstCase:
    """The worst case of a loop that is stable as entered."""
    tolerated = tolerated_error(loop, margins, trial.parts.unit_rad_s)
    if tolerated.attained <= 1.0 + BOUNDARY:
        return _refuted(loop, trial, tolerated, NOTE_NOT_CONFIRMED)
    bounds = loop.bounds()
    wanted = _wanted(margins)
    ends = _Ends(bounds, lower_end(loop, bounds, wanted), upper_end(loop, bounds, wanted))
    search = _Search(loop, ends, margins, trial.parts.unit_rad_s)
    distance = search.distance() if _no_roots_at_the_ends(ends) else Minimum(0.0, 0.0)
    if distance.proven <= 0:
        return _refuted(loop, trial, tolerated, NOTE_TOO_MUCH_WORK)
    gain = search.log_gain_margin(distance.proven)
    phase, delay = search.phase_margin(), search.delay_margin()
    wide = distance.proven < (1.0 - 1.01 * DISTANCE_SLACK) * distance.attained
    # the box as stated is proven in any case
    scale = replace(tolerated, proven=max(1.0, tolerated.proven))
    return WorstCase(
        analysis="continuous",
        stable_for_all=True,
        counterexample=None,
        # what was attained is attained to rounding only
        max_sensitivity=Interval(at_least=(1.0 - CERTAIN) / distance.attained, at_most=1.0 / distance.proven),
        gain_margin=math.exp(gain) if isinstance(gain, float) else gain,
        phase_margin_deg=math.degrees(phase) if isinstance(phase, float) else phase,
        delay_margin_s=delay / trial.parts.unit_rad_s if isinstance(delay, float) else delay,
        tolerated_error_scale=scale.interval,
        notes=(NOTE_TOO_MUCH_WORK,) if wide or tolerated.too_wide or None in (gain, phase, delay) else (),
    )


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
class _Search:
    """The searches over the box as stated; they begin with one and the same set of cells.

    Margins are proven values on the safe side of the worst member's own, None past the bound on work.
    """

    loop: UncertainLoop
    ends: _Ends
    nominal: Margins | None
    unit_rad_s: float

    @cached_property
    def cells(self) -> Cells:
        """The first cells, from the lower to the upper end."""
        return first_cells(self.loop, self.ends.bounds, self.ends.low.omega, self.ends.high.omega)

    def _of_nominal(self, name: str) -> float:
        """A margin of the loop as entered, which is a member; inf where it has none."""
        margin = None if self.nominal is None else getattr(self.nominal, name)
        return margin if isinstance(margin, float) else math.inf

    def distance(self) -> Minimum:
        """The distance of −1 from all of the box; proven ≤ 0: not shown to be stable."""
        low = _distance_in(self.ends.low, grows=self.ends.low.order > 0)
        high = _distance_in(self.ends.high, grows=self.ends.high.order < 0)
        attained = min(low[1], high[1])
        if math.isfinite(sensitivity := self._of_nominal("max_sensitivity")):
            attained = min(attained, 1.0 / sensitivity)
        known, elsewhere = Minimum(0.0, attained), min(low[0], high[0])
        # past the bound on work a wide bracket is better than none
        for share in (DISTANCE_SLACK, WIDEST_SLACK):
            try:
                quantity = Distance(self.ends.bounds, share)
                return minimum(quantity, self.cells, known.attained, elsewhere)
            except WorkBoundError as error:
                known = Minimum(error.known.proven, min(error.known.attained, attained))
                if known.proven > 0:
                    break
        return known

    def log_gain_margin(self, distance: float) -> Told:
        """ln of the worst gain margin, over members that come no nearer to −1 than `distance`."""
        low, high = self.ends.low, self._far_enough()
        found = [_gain_margin_in(low, vanishes=low.order < 0), _gain_margin_in(high, vanishes=high.order > 0)]
        elsewhere, attained = (min(part) for part in zip(*found, strict=True))
        attained = min(attained, math.log(self._of_nominal("gain_margin")))
        quantity = GainMargin(self.ends.bounds, self.loop, distance)
        return self._least(quantity, elsewhere, attained, high)

    def _far_enough(self) -> End:
        """The upper end so far out that it has no crossing nearer to 1 than one before it."""
        high, bounds = self.ends.high, self.ends.bounds
        if math.isfinite(self._of_nominal("gain_margin")) or not high.turns or high.order <= 0:
            return high
        # within one turn of the dead time past the end there is a crossing; abs L there is at least this
        omega = high.omega + (TURN + 2.0 * high.angle_error) / bounds.dead_time[1]
        grown = min(self.loop.growth_at_infinity * log for log in bounds.log_time)
        log = self.loop.log_gain + bounds.log_gain[0] + grown - high.order * math.log(omega) - high.log_error
        return upper_end(self.loop, bounds, Wanted(log_small=min(log, -CERTAIN), log_large=0.0))

    def phase_margin(self) -> Told:
        """The worst phase margin in rad."""
        found = [_phase_margin_in(self.ends.low), _phase_margin_in(self.ends.high)]
        elsewhere, attained = (min(part) for part in zip(*found, strict=True))
        attained = min(attained, math.radians(self._of_nominal("phase_margin_deg")))
        return self._least(PhaseMargin(self.ends.bounds, self.loop), elsewhere, attained, self.ends.high)

    def delay_margin(self) -> Told:
        """The worst delay margin in the loop's own unit of time."""
        low, high = self.ends.low, self.ends.high
        # a crossing that may lie beyond every frequency leaves no time at all
        if high.order < 0 or (high.order == 0 and high.log_magnitude[1] >= 0):
            return 0.0
        elsewhere = math.inf
        if low.order == 0 and low.log_magnitude[0] <= 0 <= low.log_magnitude[1]:
            elsewhere = low.distance_of_angle / low.omega
        attained = self._of_nominal("delay_margin_s") * self.unit_rad_s
        return self._least(DelayMargin(self.ends.bounds, self.loop), elsewhere, attained, high)

    def _least(self, quantity: Quantity, elsewhere: float, attained: float, high: End) -> Told:
        try:
            cells = self.cells
            if high is not self.ends.high:
                cells = first_cells(self.loop, self.ends.bounds, self.ends.low.omega, high.omega)
            found = minimum(quantity, cells, attained, elsewhere)
        except WorkBoundError:
            return None
        return "unbounded" if math.isinf(found.proven) else found.proven


def _gain_margin_in(end: End, *, vanishes: bool) -> tuple[float, float]:
    """(A bound below ln of the gain margin in an end, what is attained in it); inf: none."""
    if end.never_crosses or (end.order != 0 and not vanishes):
        return math.inf, math.inf
    if end.order != 0:
        return -end.log_magnitude[1], math.inf
    if not end.turns and _smallest(end) > 1.0:
        return math.inf, math.inf
    exact = -math.log(_largest(end))
    return exact - end.log_error, exact


def _phase_margin_in(end: End) -> tuple[float, float]:
    """(A bound below the phase margin in an end, what is attained in it) in rad; inf: none."""
    low, high = end.log_magnitude
    if end.order != 0 or low > 0 or high < 0:
        return math.inf, math.inf
    exact = end.distance_of_angle + end.angle_error if _smallest(end) <= 1.0 <= _largest(end) else math.inf
    return end.distance_of_angle, exact


@dataclass(frozen=True, slots=True)
class _Trial:
    """What it takes to try a member: the loop as it was entered."""

    parts: ClosedLoopParts
    plant_model: PlantModel
    controller: Controller
    ranges: Ranges | None
    loop: UncertainLoop

    def member(self, log_gain: float, log_time: float, dead_time: float) -> BoxMember:
        """The factors of a member, its dead time (in the loop's own unit) told as factor and extra."""
        box, times = self.plant_model.uncertainty or Uncertainty(), self.loop.dead_times
        entered = dead_time + times.reduction
        factor = 1.0
        if times.entered > 0:
            factor = min(max(entered / times.entered, box.dead_time[0]), box.dead_time[1])
        extra = max(0.0, entered - factor * times.entered) / self.parts.unit_rad_s
        return BoxMember(
            gain=_to_edge(math.exp(log_gain), box.gain),
            time_constants=_to_edge(math.exp(log_time), box.time_constants),
            dead_time=_to_edge(factor, box.dead_time),
            dead_time_extra_s=_to_edge(extra, box.dead_time_extra_s, CERTAIN * self.plant_model.dead_time_s),
        )

    def is_unstable(self, member: BoxMember) -> bool:
        """Both routes call the member unstable."""
        try:
            parts = form_loop(member_of(self.plant_model, member), self.controller, self.ranges)
            stability = decide(parts, realise(parts), AxisResponse.of(parts.loop)).stability
        except (ArithmeticError, FieldError, np.linalg.LinAlgError):
            return False
        return stability.verdict == "unstable"


def _to_edge(value: float, ends: tuple[float, float], size: float = 0.0) -> float:
    """The value in its range: the end of it that rounding alone has missed, else itself."""
    for end in ends:
        if abs(value - end) <= CERTAIN * end + size:
            return end
    return min(max(value, ends[0]), ends[1])


def _refuted(loop: UncertainLoop, trial: _Trial, tolerated: Tolerated, otherwise: str) -> WorstCase:
    """The answer where the box is not proven: unstable members lie beside one with a root on the axis, if
    anywhere; `otherwise` is the note where none is confirmed.
    """
    # dict: a corner may be the end of the way
    places = dict.fromkeys(_beyond(loop, tolerated) + _corners(loop))
    found = next((m for m in (trial.member(*place) for place in places) if trial.is_unstable(m)), None)
    if found is None:
        return _nothing(None, notes=(otherwise,), tolerated=tolerated.interval)
    # whatever the search has met: the box as stated is too wide
    refuted = replace(tolerated, attained=min(1.0, tolerated.attained))
    return _nothing(False, counterexample=found, tolerated=refuted.interval)


def _beyond(loop: UncertainLoop, tolerated: Tolerated) -> list[Touching]:
    """Members beyond the touching one: the corner on its side, and the way from the loop as entered on."""
    touching = tolerated.touching
    if touching is None or not tolerated.attained > 0:
        return []
    nominal, (low, high) = loop.dead_times.nominal, loop.dead_times.range()
    bounds = loop.bounds()
    # the corner beyond it has factors that people know
    places = [
        Touching(
            bounds.log_gain[touching.log_gain > 0],
            bounds.log_time[touching.log_time > 0],
            bounds.dead_time[touching.dead_time > nominal],
        )
    ]
    edge = 1.0 / tolerated.attained
    for factor in sorted({edge, *(min(edge, 1.0 + step) for step in STEPS_BEYOND)}, reverse=True):
        dead_time = nominal + factor * (touching.dead_time - nominal)
        dead_time = min(max(dead_time, low), high)
        places.append(Touching(factor * touching.log_gain, factor * touching.log_time, dead_time))
    return places


def _corners(loop: UncertainLoop) -> list[Touching]:
    bounds = loop.bounds()
    return [
        Touching(log_gain, log_time, dead_time)
        for log_gain in sorted(set(bounds.log_gain), reverse=True)
        for log_time in sorted(set(bounds.log_time))
        for dead_time in sorted(set(bounds.dead_time), reverse=True)
    ]


def _nothing(
    stable_for_all: bool | None,
    counterexample: BoxMember | None = None,
    notes: tuple[str, ...] = (),
    tolerated: Interval | None = None,
) -> WorstCase:
    """The answer without margins: they have no meaning where some member is, or may be, unstable."""
    return WorstCase(
        analysis="continuous",
        stable_for_all=stable_for_all,
        counterexample=counterexample,
        max_sensitivity=None,
        gain_margin=None,
        phase_margin_deg=None,
        delay_margin_s=None,
        tolerated_error_scale=tolerated,
        notes=notes,
    )


def _open() -> WorstCase:
    """A controller or plant of gain 0: every member is stable and nothing is amplified."""
    return WorstCase(
        analysis="continuous",
        stable_for_all=True,
        counterexample=None,
        max_sensitivity=Interval(at_least=1.0, at_most=1.0),
        gain_margin="unbounded",
        phase_margin_deg="unbounded",
        delay_margin_s="unbounded",
        tolerated_error_scale=Interval(at_least=LARGEST_SCALE, at_most="unbounded"),
    )
