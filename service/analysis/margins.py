"""Margins and peaks of a stable loop, each at the root of its own condition on L(jω), never read off a grid.

Definitions. With L the open loop, S = 1/(1+L), T = L/(1+L):
    gain margin              smallest k > 1 with 1 + k·L(jω) = 0 at some ω
    gain reduction margin    largest k < 1 of that kind
    phase margin             least abs(180° + arg L) over all gain crossovers
    delay margin             least (180° + arg L)/ω over all gain crossovers, the phase taken in 0-360°
    maximum sensitivity      sup abs S;   maximum complementary sensitivity   sup abs T
    disk margin              inf 2·abs(1+L)/abs(1−L), symmetric, at most 2
The ends of the axis count as crossings: ω = 0, and infinity where L does not roll off.

Sources: K. J. Åström, T. Hägglund, Advanced PID Control (ISA 2006), sections 4.6 and 7.2, from memory; the disk
margin: P. Seiler, A. Packard, P. Gahinet, An Introduction to Disk Margins, IEEE Control Systems Magazine 40 (2020).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from service.analysis.frequency import (
    LISTED_FACTORS,
    MAX_LISTED,
    AxisResponse,
    WorkBoundError,
    log_response,
)
from service.analysis.loop import Complexes, OpenLoop, Reals
from service.analysis.results import Crossovers, GainCrossover, Margins, PhaseCrossover, Quantity

ROTATION_STEP_RAD = 0.2
"""How far e^(−jωθ) may turn between two points where peaks are looked for."""

MAX_PEAK_POINTS = 200_000
"""Work bound: more points than this and a peak is not computed."""


@dataclass(frozen=True, slots=True)
class Peak:
    """A supremum over frequency; `rad_s` (in the loop's unit) is None where it is approached, not attained."""

    value: float
    omega: float | None


def crossovers(axis: AxisResponse, unit_rad_s: float) -> Crossovers:
    """Both lists of crossovers, frequencies in rad/s."""
    at = axis.gain_crossovers
    margin_deg = np.degrees(_signed_phase_margin(axis.loop, at))
    gains = tuple(
        GainCrossover(rad_s=float(omega) * unit_rad_s, phase_margin_deg=float(margin))
        for omega, margin in zip(at, margin_deg, strict=True)
    )
    try:
        phases, more = _phase_crossovers(axis, unit_rad_s)
    except WorkBoundError:
        phases, more = (), True
    return Crossovers(
        gain_crossovers=gains[:MAX_LISTED],
        phase_crossovers=phases[:MAX_LISTED],
        truncated=more or len(gains) > MAX_LISTED or len(phases) > MAX_LISTED,
    )


def margins(axis: AxisResponse, listed: Crossovers, unit_rad_s: float) -> Margins:
    """Every margin of a loop that is stable. Raises WorkBoundError where the bound on the work is passed."""
    loop = axis.loop
    upper, lower = _gain_margins(axis)
    phase_deg, delay = _phase_and_delay_margin(axis)
    sensitivity = peak(axis, Sensitivity(loop))
    complementary = peak(axis, ComplementarySensitivity(loop))
    disk = peak(axis, DiskSensitivity(loop))
    return Margins(
        gain_margin=upper,
        gain_reduction_margin=lower,
        phase_margin_deg=phase_deg,
        delay_margin_s="unbounded" if delay is None else delay / unit_rad_s,
        max_sensitivity=sensitivity.value,
        max_sensitivity_rad_s="unbounded" if sensitivity.omega is None else sensitivity.omega * unit_rad_s,
        max_complementary_sensitivity=complementary.value,
        disk_margin=min(2.0, 1.0 / disk.value),
        gain_crossovers=listed.gain_crossovers,
        phase_crossovers=listed.phase_crossovers,
        truncated=listed.truncated,
    )


def _signed_phase_margin(loop: OpenLoop, omega: Reals) -> Reals:
    """180° + arg L at gain crossovers in (−π, π], shape of `omega`."""
    beyond = log_response(loop, omega).imag + math.pi
    return np.asarray(-((math.pi - beyond) % (2 * math.pi)) + math.pi)


def _phase_crossovers(axis: AxisResponse, unit_rad_s: float) -> tuple[tuple[PhaseCrossover, ...], bool]:
    omega, logs = axis.phase_crossovers
    low, high = LISTED_FACTORS
    found = [
        PhaseCrossover(rad_s=float(at) * unit_rad_s, gain_factor=math.exp(-log))
        for at, log in zip(omega, logs, strict=True)
        if math.log(low) <= -log <= math.log(high)
    ]
    at_origin, at_infinity = _factors_at_the_ends(axis.loop)
    if at_origin is not None and low <= at_origin <= high:
        found.insert(0, PhaseCrossover(rad_s=0.0, gain_factor=at_origin))
    if at_infinity is not None and axis.loop.dead_time == 0 and low <= at_infinity <= high:
        found.append(PhaseCrossover(rad_s="unbounded", gain_factor=at_infinity))
    return tuple(found), len(found) > MAX_LISTED


def _factors_at_the_ends(loop: OpenLoop) -> tuple[float | None, float | None]:
    """1/abs L at ω = 0 and ω → ∞ where L is real and negative there (with dead time: any value is reached)."""
    origin = infinity = None
    if loop.order_at_origin == 0 and loop.origin_coefficient < 0:
        origin = 1.0 / -loop.origin_coefficient
    if loop.excess == 0 and loop.sign != 0 and (loop.sign < 0 or loop.dead_time > 0):
        infinity = math.exp(-loop.log_gain)
    return origin, infinity


def _gain_margins(axis: AxisResponse) -> tuple[Quantity, Quantity]:
    _, logs = axis.phase_crossovers
    factors = [math.exp(-log) for log in logs] + [f for f in _factors_at_the_ends(axis.loop) if f is not None]
    above = [factor for factor in factors if factor > 1]
    below = [factor for factor in factors if factor < 1]
    return (min(above) if above else "unbounded"), (max(below) if below else "unbounded")


def _phase_and_delay_margin(axis: AxisResponse) -> tuple[Quantity, float | None]:
    omega = axis.gain_crossovers
    instant = axis.loop.dead_time == 0 and axis.loop.high_frequency_magnitude >= 1
    if not omega.size:
        return "unbounded", 0.0 if instant else None
    margin = _signed_phase_margin(axis.loop, omega)
    delays = np.where(margin > 0, margin, margin + 2 * math.pi) / omega
    return math.degrees(float(np.abs(margin).min())), 0.0 if instant else float(delays.min())


class Sensitivity:
    """S = 1/(1+L) and what a peak search needs of it."""

    def __init__(self, loop: OpenLoop) -> None:
        self.loop = loop

    def numerator(self, omega: Reals, response: Complexes) -> Complexes:
        """A in A/(1+L), shape of `omega`."""
        return np.ones_like(response)

    def numerator_slope(self, omega: Reals, response: Complexes, slope: Complexes) -> Reals:
        """Re d ln A/dω, shape of `omega`; `slope` is d ln L/dω."""
        return np.zeros_like(omega)

    def bound(self, magnitude: Reals) -> Reals:
        """An upper bound of abs A/(1+L) from abs L alone, where abs L < 1; shape of `magnitude`."""
        return 1.0 / (1.0 - magnitude)

    def ends(self) -> list[float]:
        """Values at ω = 0 and ω → ∞ where they are finite; the largest that is approached along the axis."""
        return [abs(self.of_real(value)) for value in end_values(self.loop)]

    def of_real(self, response: float) -> float:
        """The value where L is real; `response` may be inf."""
        return 0.0 if math.isinf(response) else 1.0 / (1.0 + response)


class ComplementarySensitivity(Sensitivity):
    """T = L/(1+L)."""

    def numerator(self, omega: Reals, response: Complexes) -> Complexes:
        """L itself."""
        return response

    def numerator_slope(self, omega: Reals, response: Complexes, slope: Complexes) -> Reals:
        """Re d ln L/dω."""
        return slope.real

    def bound(self, magnitude: Reals) -> Reals:
        """abs L/(1 − abs L)."""
        return magnitude / (1.0 - magnitude)

    def of_real(self, response: float) -> float:
        """L/(1+L)."""
        return 1.0 if math.isinf(response) else response / (1.0 + response)


class DiskSensitivity(Sensitivity):
    """(S − T)/2 = (1−L)/(2(1+L)), whose peak is the inverse of the disk margin."""

    def numerator(self, omega: Reals, response: Complexes) -> Complexes:
        """(1 − L)/2."""
        return 0.5 * (1.0 - response)

    def numerator_slope(self, omega: Reals, response: Complexes, slope: Complexes) -> Reals:
        """Re d ln(1 − L)/dω."""
        with np.errstate(all="ignore"):
            return np.nan_to_num((-slope * response / (1.0 - response)).real)

    def bound(self, magnitude: Reals) -> Reals:
        """(1 + abs L)/(2(1 − abs L))."""
        return 0.5 * (1.0 + magnitude) / (1.0 - magnitude)

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
        last = loop.sign * math.exp(loop.log_gain)
        # with dead time L goes on turning: every angle is approached, the worst is real and negative
        values += [last] if loop.dead_time == 0 else [abs(last), -abs(last)]
    return values


def peak(axis: AxisResponse, quantity: Sensitivity) -> Peak:
    """The supremum of abs A/(1+L) over the axis.

    Stationary points are bracketed by the sign of d abs(A/(1+L))²/dω, which is smooth wherever L is, however
    sharp the peak, and solved by halving and secant. With dead time the points follow its rotation as far down
    as abs L could still make a larger value than the largest found. Raises WorkBoundError past the bound.
    """
    best = _ends_first(quantity)
    floor = 0.5
    done_above = math.inf
    while True:
        omega = _points(axis, floor, done_above)
        best = _largest(best, _stationary_peaks(axis.loop, quantity, omega))
        if axis.loop.dead_time == 0 or float(quantity.bound(np.array(floor))) <= best.value * (1 + 1e-9):
            return best
        if floor < 1e-4:
            # what is left differs from its end value by less than its bound says, and that is the end's
            return best
        done_above, floor = floor, max(0.3 * floor, 5e-5)


def _ends_first(quantity: Sensitivity) -> Peak:
    values = quantity.ends()
    largest = max(values)
    return Peak(largest, 0.0 if values[0] == largest else None)


def _largest(best: Peak, found: list[Peak]) -> Peak:
    # an end that only ties is the supremum that is approached; a peak must stand above it
    for candidate in found:
        if candidate.value > best.value * (1 + 1e-14):
            best = candidate
    return best


def _points(axis: AxisResponse, floor: float, done_above: float) -> Reals:
    """Grid points, with points between them that follow the rotation where floor ≤ abs L ≤ done_above."""
    omega, magnitude = axis.omega, axis.log_response.real
    rotation = np.diff(omega) * axis.loop.dead_time
    high = np.maximum(magnitude[:-1], magnitude[1:])
    low = np.minimum(magnitude[:-1], magnitude[1:])
    wanted = (high >= math.log(floor) - 0.1) & (low <= math.log(done_above) + 0.1)
    pieces = np.where(wanted, np.ceil(rotation / ROTATION_STEP_RAD), 1).astype(int)
    pieces = np.maximum(pieces, 1)
    if pieces.sum() > MAX_PEAK_POINTS:
        raise WorkBoundError("too many points to look for a peak")
    if done_above < math.inf:
        # what lies above was searched before
        pieces = np.where(wanted, pieces, 0)
    if not pieces.sum():
        return omega[:0]
    start = np.repeat(omega[:-1], pieces)
    step = np.repeat(np.diff(omega) / np.maximum(pieces, 1), pieces)
    within = np.arange(len(start)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    last = np.flatnonzero(pieces)[-1]
    return np.append(start + within * step, omega[last + 1])


def _stationary_peaks(loop: OpenLoop, quantity: Sensitivity, omega: Reals) -> list[Peak]:
    if omega.size < 2:
        return []

    def growth(at: Reals) -> Reals:
        return _growth(loop, quantity, at)[0]

    sign = growth(omega)
    brackets = np.flatnonzero((sign[:-1] > 0) & (sign[1:] <= 0))
    if not brackets.size:
        return []
    # only the highest few can hold the supremum: compare by the larger end value, kept with a wide allowance
    values = _growth(loop, quantity, omega)[1]
    ends = np.maximum(values[brackets], values[brackets + 1])
    brackets = brackets[ends >= 0.5 * ends.max()]
    at = _zero_between(growth, omega[brackets], omega[brackets + 1])
    solved = _growth(loop, quantity, at)[1]
    return [Peak(float(value), float(where)) for value, where in zip(solved, at, strict=True)]


def _growth(loop: OpenLoop, quantity: Sensitivity, omega: Reals) -> tuple[Reals, Reals]:
    """(A number with the sign of the slope of abs A/(1+L), and the value itself), shapes of `omega`."""
    with np.errstate(all="ignore"):
        response = np.exp(log_response(loop, omega))
        slope = 1j * loop.log_derivative(1j * omega)
        distance = 1.0 + response
        # divided by abs L² where L is large, so that nothing overflows
        scale = 1.0 / np.maximum(1.0, np.abs(response)) ** 2
        along = (np.conj(distance) * response * slope).real * scale
        rate = quantity.numerator_slope(omega, response, slope) * np.abs(distance) ** 2 * scale - along
        value = np.abs(quantity.numerator(omega, response)) / np.abs(distance)
    return np.nan_to_num(rate), np.nan_to_num(value)


def _zero_between(function: Callable[[Reals], Reals], low: Reals, high: Reals) -> Reals:
    """Where a function falls through 0 between `low` and `high`: false position (Illinois) with halving; arrays."""
    low, high = low.copy(), high.copy()
    at_low, at_high = function(low), function(high)
    for count in range(60):
        with np.errstate(all="ignore"):
            middle = (low * at_high - high * at_low) / (at_high - at_low)
        inside = (middle > low) & (middle < high)
        middle = np.where(inside & (count % 4 != 3), middle, 0.5 * (low + high))
        value = function(middle)
        positive = value > 0
        at_low, at_high = (
            np.where(positive, value, np.where(value < 0, 0.5 * at_low, at_low)),
            np.where(positive, 0.5 * at_high, value),
        )
        low, high = np.where(positive, middle, low), np.where(positive, high, middle)
        # a peak is flat: its value is right to the square of this
        if np.all(high - low <= 1e-9 * high):
            break
    return 0.5 * (low + high)
