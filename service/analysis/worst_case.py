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

import numpy as np

from service.analysis.box import UncertainLoop, member_of, uncertain_loop
from service.analysis.box_ends import EndsError
from service.analysis.box_search import first_cells, sweep
from service.analysis.controller import Controller
from service.analysis.errors import FieldError
from service.analysis.frequency import AxisResponse
from service.analysis.loop import ClosedLoopParts, form_loop
from service.analysis.plant import PlantModel, Ranges, Uncertainty
from service.analysis.realisation import realise
from service.analysis.results import Analysis, BoxMember, Interval, Margins, WorstCase
from service.analysis.stability import decide
from service.analysis.stated_box import CERTAIN, prove
from service.analysis.tolerated_error import LARGEST_SCALE, Start, Tolerated, Touching, start

NOTE_TOO_MUCH_WORK = "worst_case_too_much_work"
"""The box, the dead time or a resonance makes more cells than the stated bound on work."""

NOTE_NUMBERS = "worst_case_numbers_out_of_range"
"""The box reaches numbers that leave float64."""

NOTE_NOT_CONFIRMED = "worst_case_not_confirmed"
"""A member has a root on the axis, but none was found that both routes call unstable."""

STEPS_BEYOND = (1.0, 0.3, 0.1, 0.03, 0.01, 0.002)
"""How far beyond a member with a root on the axis unstable ones are looked for, relatively."""

BOUNDARY = 1e-7
"""A box whose edge is so near to a member with a root on the axis is not told from one that holds it."""


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
    scale = start(loop, margins, trial.parts.unit_rad_s)
    if scale.search.best.value <= 1.0 + BOUNDARY:
        _sweep_scale(loop, scale)
        return _refuted(loop, trial, scale.tolerated, NOTE_NOT_CONFIRMED)
    found = prove(loop, margins, trial.parts.unit_rad_s, scale)
    tolerated = scale.tolerated
    if tolerated.attained <= 1.0 + BOUNDARY:
        return _refuted(loop, trial, tolerated, NOTE_NOT_CONFIRMED)
    if found.distance <= 0:
        return _refuted(loop, trial, tolerated, NOTE_TOO_MUCH_WORK)
    gain, phase, delay = found.log_gain_margin, found.phase_margin, found.delay_margin
    # the box as stated is proven in any case
    tolerated = replace(tolerated, proven=max(1.0, tolerated.proven))
    return WorstCase(
        analysis="continuous",
        stable_for_all=True,
        counterexample=None,
        # what was attained is attained to rounding only
        max_sensitivity=Interval(at_least=(1.0 - CERTAIN) / found.distance_met, at_most=1.0 / found.distance),
        gain_margin=math.exp(gain) if isinstance(gain, float) else gain,
        phase_margin_deg=math.degrees(phase) if isinstance(phase, float) else phase,
        delay_margin_s=delay / trial.parts.unit_rad_s if isinstance(delay, float) else delay,
        tolerated_error_scale=tolerated.interval,
        notes=() if found.complete and not tolerated.too_wide else (NOTE_TOO_MUCH_WORK,),
    )


def _sweep_scale(loop: UncertainLoop, scale: Start) -> None:
    """Prove the scale alone, of a box that is known to be too wide."""
    cells = first_cells(loop, scale.bounds, scale.search.omega)
    if cells is None:
        scale.search.given_up = True
    else:
        sweep(loop, cells, [scale.search])


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
