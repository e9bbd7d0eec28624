"""Suprema of abs S, abs T and their like over frequency, each at a root of its own slope.

The quantities are A/(1+L) with L the open loop: A is 1 in S, L in T, (1 − L)/2 in the disk margin and C·F in
the control sensitivity (in `noise`). They are looked for together, since mostly it is the same steps of the
grid that have to be looked at.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from service.analysis.brackets import zeros_in_steps
from service.analysis.errors import WorkBoundError
from service.analysis.frequency import AxisResponse, Indices
from service.analysis.loop import Complexes, OpenLoop, Reals

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


@dataclass(frozen=True, slots=True)
class Peak:
    """A supremum over frequency; `omega` (in the loop's unit) is None where it is approached, not
    attained.
    """

    value: float
    omega: float | None


@dataclass(frozen=True, slots=True)
class Peaks:
    """The suprema of one stable loop; `control`, of the control sensitivity, is None where it has no limit
    or was not found.
    """

    sensitivity: Peak
    complementary: Peak
    disk: Peak
    control: Peak | None

    @staticmethod
    def of(axis: AxisResponse, control: Sensitivity) -> Peaks:
        """Look for all of them, and where that passes the bound on the work for all but `control`.

        Raises WorkBoundError where that passes it too.
        """
        loop, search = axis.loop, PeakSearch(axis)
        own = [Sensitivity(loop), ComplementarySensitivity(loop), DiskSensitivity(loop)]
        unbounded = any(math.isinf(value) for value in control.ends())
        try:
            found = search.peaks(own if unbounded else [*own, control])
        except WorkBoundError:
            found = search.peaks(own)
        sensitivity, complementary, disk, *more = found
        return Peaks(sensitivity, complementary, disk, more[0] if more else None)


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
    """Suprema of abs A/(1+L) over one axis, for several A at once.

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
                rest = np.ones(len(parts), bool)
                rest[chosen] = False
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
            falls = (rising[:-1] & ~rising[1:] & joined).nonzero()[0]
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
