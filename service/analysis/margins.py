"""Margins and peaks of a stable loop, each at the root of its own condition on L(jω), never read off a grid.

Definitions. With L the open loop, S = 1/(1+L), T = L/(1+L):
    gain margin              smallest k > 1 with 1 + k·L(jω) = 0 at some ω
    gain reduction margin    largest k < 1 of that kind
    phase margin             least abs(180° + arg L) over all gain crossovers
    delay margin             least (180° + arg L)/ω over all gain crossovers, the phase taken in 0-360°
    maximum sensitivity      sup abs S;   maximum complementary sensitivity   sup abs T
    disk margin              inf 2·abs(1+L)/abs(1−L), symmetric, at most 2
The ends of the axis count as crossings: ω = 0, and infinity where L does not roll off.

Sources: K. J. Åström, T. Hägglund, Advanced PID Control (ISA 2006), sections 4.6 and 7.2, from memory; the
disk margin: P. Seiler, A. Packard, P. Gahinet, An Introduction to Disk Margins, IEEE Control Systems Magazine
40 (2020).
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from service.analysis.brackets import zeros_in_steps
from service.analysis.frequency import LISTED_FACTORS, MAX_LISTED, AxisResponse, Indices
from service.analysis.loop import Complexes, OpenLoop, Reals
from service.analysis.results import (
    Crossovers,
    GainCrossover,
    Margins,
    PhaseCrossover,
    Quantity,
    Unbounded,
)

ROTATION_STEP_RAD = 0.2
"""How far e^(−jωθ) may turn between two points where peaks are looked for."""

STEPS_OF_A_DIVIDED = 8

MAX_PEAK_POINTS = 40_000
"""Work bound: more points than this and a peak is not computed."""

PARTS_AT_MOST = 40
"""A step that dead time would divide into more parts is first divided by what its bound allows."""

STEPS_AT_ONCE = 24

PEAK_TIE = 1e-10
"""A step whose bound exceeds the largest value met by no more than this, relatively, is not searched."""

PEAK_PLACE = 1e-10
"""How well a peak's frequency is met, relatively; its value, being flat there, to the square of this."""


OUT_OF_SIGHT = 100.0
"""Where ln abs L is above this 1 + L is L, to float64 and far beyond, and its products are still in range."""

Numbers = Reals | float
"""Many numbers or one."""

Responses = Complexes | complex

TINY = 1e-300

InRadS = Callable[[Reals], Reals]
"""From a frequency on the axis, inf included, to rad/s: by a loop's unit or a sampled loop's scale."""


class WorkBoundError(Exception):
    """More work than the stated bound; what was asked for is not computed."""


@dataclass(frozen=True, slots=True)
class Peak:
    """A supremum over frequency; `omega` (in the loop's unit) is None where it is approached, not
    attained.
    """

    value: float
    omega: float | None


def crossovers(axis: AxisResponse, in_rad_s: InRadS) -> Crossovers:
    """Both lists of crossovers, frequencies in rad/s."""
    at = axis.gain_crossovers
    margin_deg = np.degrees(_signed_phase_margin(axis.loop, at))
    gains = tuple(
        GainCrossover(rad_s=rad_s, phase_margin_deg=margin)
        for rad_s, margin in zip(in_rad_s(at).tolist(), margin_deg.tolist(), strict=True)
    )
    phases, more = _phase_crossovers(axis, in_rad_s)
    return Crossovers(
        gain_crossovers=gains[:MAX_LISTED],
        phase_crossovers=phases[:MAX_LISTED],
        truncated=more or len(gains) > MAX_LISTED or len(phases) > MAX_LISTED,
    )


def margins(axis: AxisResponse, listed: Crossovers, in_rad_s: InRadS, delay_margin_s: Quantity) -> Margins:
    """Every margin of a stable loop. Raises WorkBoundError where the bound on the work is passed."""
    loop = axis.loop
    upper, lower = _gain_margins(axis, in_rad_s)
    sensitivity, complementary, disk = PeakSearch(axis).peaks(
        [Sensitivity(loop), ComplementarySensitivity(loop), DiskSensitivity(loop)]
    )
    return Margins(
        gain_margin=upper.factor,
        gain_reduction_margin=lower.factor,
        phase_margin_deg=_phase_margin_deg(axis),
        delay_margin_s=delay_margin_s,
        max_sensitivity=sensitivity.value,
        max_sensitivity_rad_s=_told_rad_s(
            in_rad_s, math.inf if sensitivity.omega is None else sensitivity.omega
        ),
        max_complementary_sensitivity=complementary.value,
        disk_margin=min(2.0, 1.0 / disk.value),
        gain_margin_period_s=upper.period_s,
        gain_reduction_margin_period_s=lower.period_s,
        gain_crossovers=listed.gain_crossovers,
        phase_crossovers=listed.phase_crossovers,
        truncated=listed.truncated,
    )


def _signed_phase_margin(loop: OpenLoop, omega: Reals) -> Reals:
    """180° + arg L at gain crossovers in (−π, π], shape of `omega`."""
    beyond = loop.log_response(omega).imag + math.pi
    return np.asarray(-((math.pi - beyond) % (2 * math.pi)) + math.pi)


def _phase_crossovers(axis: AxisResponse, in_rad_s: InRadS) -> tuple[tuple[PhaseCrossover, ...], bool]:
    crossings = axis.phase_crossovers
    low, high = LISTED_FACTORS
    found = [
        PhaseCrossover(rad_s=rad_s, gain_factor=math.exp(-log))
        for rad_s, log in zip(
            in_rad_s(crossings.omega).tolist(), crossings.log_magnitude.tolist(), strict=True
        )
        if math.log(low) <= -log <= math.log(high)
    ]
    at_origin, at_infinity = _factors_at_the_ends(axis.loop)
    if at_origin is not None and low <= at_origin <= high:
        found.insert(0, PhaseCrossover(rad_s=0.0, gain_factor=at_origin))
    if at_infinity is not None and axis.loop.dead_time == 0 and low <= at_infinity <= high:
        found.append(PhaseCrossover(rad_s=_told_rad_s(in_rad_s, math.inf), gain_factor=at_infinity))
    return tuple(found), crossings.truncated


def _factors_at_the_ends(loop: OpenLoop) -> tuple[float | None, float | None]:
    """1/abs L at ω = 0 and ω → ∞ where L is real and negative there (with dead time: any value is
    reached).
    """
    origin = infinity = None
    if loop.order_at_origin == 0 and loop.origin_coefficient < 0:
        origin = 1.0 / -loop.origin_coefficient
    if loop.excess == 0 and loop.sign != 0 and (loop.value_at_infinity < 0 or loop.dead_time > 0):
        infinity = math.exp(-loop.log_gain)
    return origin, infinity


@dataclass(frozen=True, slots=True)
class _GainLimit:
    factor: Quantity
    period_s: Quantity


def _gain_margins(axis: AxisResponse, in_rad_s: InRadS) -> tuple[_GainLimit, _GainLimit]:
    """The factors that destabilise, next above and next below 1, and the period of the oscillation there."""
    crossings = axis.phase_crossovers
    at_origin, at_infinity = _factors_at_the_ends(axis.loop)
    factors = np.exp(-crossings.log_magnitude).tolist()
    omega = crossings.omega.tolist()
    for factor, at in ((at_origin, 0.0), (at_infinity, math.inf)):
        if factor is not None:
            factors.append(factor)
            omega.append(at)
    above = [index for index, factor in enumerate(factors) if factor > 1]
    below = [index for index, factor in enumerate(factors) if factor < 1]
    return (
        _limit(min(above, key=factors.__getitem__, default=None), factors, omega, in_rad_s),
        _limit(max(below, key=factors.__getitem__, default=None), factors, omega, in_rad_s),
    )


def _limit(index: int | None, factors: list[float], omega: list[float], in_rad_s: InRadS) -> _GainLimit:
    if index is None:
        return _GainLimit("unbounded", None)
    rad_s = float(in_rad_s(np.array(omega[index])))
    if math.isinf(rad_s):
        # approached as the frequency grows: there is no period
        return _GainLimit(factors[index], None)
    return _GainLimit(factors[index], 2.0 * math.pi / rad_s if rad_s > 0 else "unbounded")


def _phase_margin_deg(axis: AxisResponse) -> Quantity:
    omega = axis.gain_crossovers
    if not omega.size:
        return "unbounded"
    return math.degrees(float(np.abs(_signed_phase_margin(axis.loop, omega)).min()))


def delay_margin(axis: AxisResponse) -> float:
    """The delay margin of a continuous loop in its own unit of time; inf where there is none."""
    omega = axis.gain_crossovers
    if axis.loop.dead_time == 0 and axis.loop.high_frequency_magnitude >= 1:
        return 0.0
    if not omega.size:
        return math.inf
    margin = _signed_phase_margin(axis.loop, omega)
    return float((np.where(margin > 0, margin, margin + 2 * math.pi) / omega).min())


def _told_rad_s(in_rad_s: InRadS, omega: float) -> float | Unbounded:
    return told(lambda value: float(in_rad_s(np.array(value))), omega)


def told(scale: Callable[[float], float], value: float) -> float | Unbounded:
    """A scaled value, or "unbounded" where it has no limit."""
    scaled = scale(value)
    return scaled if math.isfinite(scaled) else "unbounded"


class Sensitivity:
    """S = 1/(1+L) and what a peak search needs of it."""

    def __init__(self, loop: OpenLoop) -> None:
        self.loop = loop

    def numerator(self, omega: Reals, response: Complexes) -> Complexes | float:
        """A in A/(1+L), shape of `omega` or one for all."""
        return 1.0

    def growth(self, omega: Numbers, response: Responses, slope: Responses) -> Numbers:
        """A number with the sign of d abs(A/(1+L))/dω, which is smooth wherever L is, however sharp the peak.

        Arrays of one shape, or plain numbers: ω, L and d ln L/dω.
        """
        return -(slope * response * (1.0 + response).conjugate()).real

    def bound(self, magnitude: Reals, left: Reals, right: Reals) -> Reals:
        """An upper bound of abs A/(1+L) from `left` to `right`, where `magnitude` is the abs L nearest to 1;
        (k,).
        """
        return 1.0 / np.abs(1.0 - magnitude)

    def ends(self) -> list[float]:
        """Values at ω = 0 and, behind it, those approached as ω grows."""
        return [abs(self.of_real(value)) for value in end_values(self.loop)]

    def of_real(self, response: float) -> float:
        """The value where L is real; `response` may be inf."""
        return 0.0 if math.isinf(response) else 1.0 / (1.0 + response)


class ComplementarySensitivity(Sensitivity):
    """T = L/(1+L)."""

    def numerator(self, omega: Reals, response: Complexes) -> Complexes | float:
        """L itself."""
        return response

    def growth(self, omega: Numbers, response: Responses, slope: Responses) -> Numbers:
        """The sign of d abs T/dω."""
        return (slope * (1.0 + response).conjugate()).real

    def bound(self, magnitude: Reals, left: Reals, right: Reals) -> Reals:
        """abs L/abs(1 − abs L)."""
        return magnitude / np.abs(1.0 - magnitude)

    def of_real(self, response: float) -> float:
        """L/(1+L)."""
        return 1.0 if math.isinf(response) else response / (1.0 + response)


class DiskSensitivity(Sensitivity):
    """(S − T)/2 = (1−L)/(2(1+L)), whose peak is the inverse of the disk margin."""

    def numerator(self, omega: Reals, response: Complexes) -> Complexes | float:
        """(1 − L)/2."""
        return 0.5 * (1.0 - response)

    def growth(self, omega: Numbers, response: Responses, slope: Responses) -> Numbers:
        """The sign of d abs((1 − L)/(1 + L))/dω."""
        return -(slope * response * (1.0 - response * response).conjugate()).real

    def bound(self, magnitude: Reals, left: Reals, right: Reals) -> Reals:
        """(1 + abs L)/(2·abs(1 − abs L))."""
        return 0.5 * (1.0 + magnitude) / np.abs(1.0 - magnitude)

    def of_real(self, response: float) -> float:
        """(1−L)/(2(1+L))."""
        return 0.5 if math.isinf(response) else 0.5 * (1.0 - response) / (1.0 + response)


def end_values(loop: OpenLoop) -> list[float]:
    """L at ω = 0 and the real values it tends to as ω grows; inf where it grows without bound."""
    order = loop.order_at_origin
    values = [math.inf if order > 0 else (loop.origin_coefficient if order == 0 else 0.0)]
    if loop.excess > 0 or loop.sign == 0:
        values.append(0.0)
    elif loop.excess < 0:
        values.append(math.inf)
    else:
        last = loop.value_at_infinity
        # with dead time L goes on turning: every angle is approached, the worst is real and negative
        values += [last] if loop.dead_time == 0 else [abs(last), -abs(last)]
    return values


@dataclass(frozen=True, eq=False)
class _Steps:
    """Steps of a grid: ends and abs L at them, shapes (k,)."""

    left: Reals
    right: Reals
    magnitude_left: Reals
    magnitude_right: Reals

    def only(self, chosen: Indices | npt.NDArray[np.bool_]) -> _Steps:
        """Some of the steps."""
        return _Steps(
            self.left[chosen], self.right[chosen], self.magnitude_left[chosen], self.magnitude_right[chosen]
        )

    def bounds(self, quantity: Sensitivity) -> Reals:
        """What each step cannot exceed, inf where abs L passes 1 in it; (k,)."""
        low = np.minimum(self.magnitude_left, self.magnitude_right)
        high = np.maximum(self.magnitude_left, self.magnitude_right)
        bound = quantity.bound(np.where(high < 1.0, high, low), self.left, self.right)
        return np.where((low < 1.0) == (high < 1.0), bound, np.inf)


class PeakSearch:
    """Suprema of abs A/(1+L) over one axis, for several A.

    abs A/(1+L) cannot exceed a bound that follows from abs L alone, so a step of the grid is searched only
    where its bound is above the largest value met so far, and one in which dead time turns L many times is
    divided first. In a step, stationary points are bracketed by the sign of the slope.
    """

    def __init__(self, axis: AxisResponse) -> None:
        self._axis = axis
        self._response = np.exp(axis.log_response)
        magnitude = np.abs(self._response)
        self._steps = _Steps(axis.omega[:-1], axis.omega[1:], magnitude[:-1], magnitude[1:])

    def peaks(self, quantities: list[Sensitivity]) -> list[Peak]:
        """The supremum of each. Raises WorkBoundError past the bound on points."""
        best = [_ends_first(quantity) for quantity in quantities]
        met = np.array([self._met_on_grid(*pair) for pair in zip(quantities, best, strict=True)])
        steps, work = self._steps, 0
        bounds = np.array([steps.bounds(quantity) for quantity in quantities])
        while (promising := bounds > (met * (1 + PEAK_TIE))[:, None]).any():
            some = np.flatnonzero(promising.any(axis=0))
            steps, bounds = steps.only(some), bounds[:, some]
            parts = self._parts(steps)
            narrow = np.flatnonzero(parts <= PARTS_AT_MOST)
            if not narrow.size:
                if work + STEPS_OF_A_DIVIDED * len(parts) > MAX_PEAK_POINTS:
                    raise WorkBoundError("too many points to look for a peak")
                steps = self._divided(steps)
                bounds = np.array([steps.bounds(quantity) for quantity in quantities])
                work += bounds.shape[1]
            else:
                # the highest bounds first: what is met there mostly spares the rest
                height = (bounds[:, narrow] / np.maximum(met, TINY)[:, None]).max(axis=0)
                chosen = narrow[np.argsort(-height)][:STEPS_AT_ONCE]
                turns = self._stationary(quantities, steps.only(chosen), parts[chosen])
                for index, candidates in enumerate(turns):
                    for candidate in candidates:
                        met[index] = max(met[index], candidate.value)
                        # an end that only ties is a supremum that is approached; a peak must stand above it
                        if candidate.value > best[index].value * (1 + 1e-14):
                            best[index] = candidate
                work += int(parts[chosen].sum())
                rest = np.delete(np.arange(len(parts)), chosen)
                steps, bounds = steps.only(rest), bounds[:, rest]
            if work > MAX_PEAK_POINTS:
                raise WorkBoundError("too many points to look for a peak")
        return best

    def _met_on_grid(self, quantity: Sensitivity, end: Peak) -> float:
        values = _values(quantity, self._axis.omega, self._response)
        return max(end.value, float(values[np.isfinite(values)].max(initial=0.0)))

    def _parts(self, steps: _Steps) -> Reals:
        """Into how many parts each step is divided so that L turns little in one."""
        loop = self._axis.loop
        turned = (steps.right - steps.left) * loop.dead_time
        if loop.all_pass:
            turned = turned + 2.0 * loop.all_pass * (np.arctan(steps.right) - np.arctan(steps.left))
        return np.maximum(np.ceil(turned / ROTATION_STEP_RAD), 1.0)

    def _divided(self, steps: _Steps) -> _Steps:
        """Each step in `STEPS_OF_A_DIVIDED`."""
        share = np.linspace(0.0, 1.0, STEPS_OF_A_DIVIDED + 1)
        omega = steps.left[:, None] + (steps.right - steps.left)[:, None] * share
        magnitude = np.exp(self._axis.loop.log_response(omega).real)
        return _Steps(
            omega[:, :-1].ravel(), omega[:, 1:].ravel(), magnitude[:, :-1].ravel(), magnitude[:, 1:].ravel()
        )

    def _stationary(self, quantities: list[Sensitivity], steps: _Steps, parts: Reals) -> list[list[Peak]]:
        """The local maxima of each quantity inside the steps."""
        omega, joined = _points(steps, parts.astype(int))
        logs, slope = self._axis.loop.on_axis(omega)
        response = np.exp(_capped(logs))
        places = []
        for quantity in quantities:
            growth = np.asarray(quantity.growth(omega, response, slope))
            rising = growth > 0
            falls = np.flatnonzero(rising[:-1] & ~rising[1:] & joined)
            places.append(zeros_in_steps(self._growth_of(quantity), omega, growth, falls, PEAK_PLACE))
        responses = np.exp(self._axis.loop.log_response(np.concatenate(places)))
        found, first = [], 0
        for quantity, at in zip(quantities, places, strict=True):
            values = _values(quantity, at, responses[first : first + len(at)])
            found.append([Peak(*pair) for pair in zip(values.tolist(), at.tolist(), strict=True)])
            first += len(at)
        return found

    def _growth_of(self, quantity: Sensitivity) -> Callable[[float], float]:
        loop = self._axis.loop

        def growth_at(omega: float) -> float:
            log, slope = loop.at_frequency(omega)
            response = cmath.exp(complex(min(log.real, OUT_OF_SIGHT), log.imag))
            return float(quantity.growth(omega, response, slope))

        return growth_at


def _points(steps: _Steps, parts: Indices) -> tuple[Reals, npt.NDArray[np.bool_]]:
    """Points that divide the steps, (k,), and whether a point is joined to the next, (k − 1,)."""
    count = parts + 1
    within = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    low, high = np.repeat(steps.left, count), np.repeat(steps.right, count)
    points = low + (high - low) * (within / np.repeat(parts, count))
    # the last point of a step is the first of the next: not a step of its own
    return points, within[1:] > 0


def _ends_first(quantity: Sensitivity) -> Peak:
    values = quantity.ends()
    largest = max(values)
    return Peak(largest, 0.0 if values[0] == largest else None)


def _capped(logs: Complexes) -> Complexes:
    """ln L with abs L no larger than where 1 plays no part beside it."""
    return np.asarray(np.minimum(logs.real, OUT_OF_SIGHT) + 1j * logs.imag)


def _values(quantity: Sensitivity, omega: Reals, response: Complexes) -> Reals:
    """abs A/(1+L), shape of `omega`."""
    return np.asarray(np.abs(quantity.numerator(omega, response)) / np.abs(1.0 + response))
