"""The delay margin of a loop at its scans: the least extra dead time at which a root reaches the unit circle.

More dead time is not just more phase here: where it divides a scan the sampled plant itself changes. So the
condition 1 + L(e^(jωh), δ) = 0 is one on frequency and extra dead time together. Where plant and gain
crossovers are slow against the scan it is solved by Newton from each crossover. Elsewhere a crossover may
meet −1 several times within a scan, and a direct path comes a scan later at once: there the steps in which a
root may leave are found by the turns of 1 + L about the cells of a grid over both. The least solution is
confirmed by the eigenvalues at it, and where they do not tell by counting roots on both sides.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.analysis.delay_cells import (
    DIVIDED,
    angles_of_grid,
    cells,
    fastest_mode,
    swings_between_divisions,
)
from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, Complexes, OpenLoop
from service.analysis.nyquist import count_right_of_axis
from service.analysis.results import Quantity
from service.analysis.sampled_loop import NotFactoredError, SampledLoop, form_sampled_loop
from service.analysis.sampled_roots import compressed, points_for, resolved
from service.analysis.sampled_states import sampled_states
from service.analysis.scan import SampledPlant
from service.analysis.unit_circle import Divided, at_angle

FEW_HELD = 24
"""So many past outputs are carried each for itself, more by points."""

MOST_POINTS = 60
"""Work bound: with more points than this roots are counted instead."""

CLEARLY = 1e-6
"""A root is clearly inside the circle, and clearly leaves it, by this share of 1."""

FEW_LAGS, FAR_FROM_CIRCLE = 4, 1e-3
"""Equal lags in no larger a number spread by rounding to less than this distance: eigenvalues farther from
the circle count as they are.
"""

BESIDE = 1e-7
"""Roots are counted this much before and behind the margin, relatively."""

FIRST_STEP_BACK = 1e-7
"""Scans; each step on the way back is half as long again as the one before."""

STEPS = 30

NEWTON_DONE = 1e-8
"""A step of Newton this small, relatively, leaves an error of its square."""

MAX_PROBES = 300
"""Work bound: a loop that is as near to instability as that at more delays has no delay margin computed."""

FAR_BELOW = 0.25
SLOW_PLANT = 0.5
"""A crossover at this angle ωh and below, with abs λ·h of the plant no larger than this, hardly moves in a
scan.
"""

MAX_SCANS = 3000
"""Work bound: the grid is not laid over more scans than this."""


def sampled_delay_margin_s(sampled: SampledLoop, axis: AxisResponse) -> Quantity:
    """The delay margin of a stable loop in seconds; None where counting does not confirm what was found."""
    if swings_between_divisions(sampled):
        return None
    divided = Divided.of(sampled, axis)
    starts = divided.starts(axis)
    if not starts:
        # abs L stays below 1 however the dead time divides a scan
        return "unbounded"
    touching = sorted(touch for angle in starts if (touch := _solved(sampled, angle)) is not None)
    if max(starts) <= FAR_BELOW and sampled.plant.d == 0 and fastest_mode(sampled) <= SLOW_PLANT:
        found = _confirmed(sampled, divided.reach(), touching)
    else:
        found = _least_on_grid(sampled, divided, min(starts), touching)
    if found is not None and touching and found > touching[0].delay * (1.0 + BESIDE):
        # a root lies upon the circle there: where it does not leave it comes back
        found = _left_before(sampled, divided.reach(), touching[0])
    return None if found is None else found / sampled.scanned.parts.unit_rad_s


@dataclass(frozen=True, order=True, slots=True)
class _Touch:
    """An extra dead time, in the loop's unit, at which a root lies upon the circle, at this angle ωh."""

    delay: float
    angle: float


def _confirmed(sampled: SampledLoop, reach: float, touching: list[_Touch]) -> float | None:
    """The first of the delays behind which there are unstable roots and before which there are none."""
    for touch in touching:
        if _first_to_leave(sampled, reach, touch):
            return touch.delay
        before, behind = (_unstable_roots(sampled, touch.delay * (1.0 + side)) for side in (-BESIDE, BESIDE))
        if before != 0 or behind is None:
            return None
        if behind > 0:
            return touch.delay
    return None


def _first_to_leave(sampled: SampledLoop, reach: float, touch: _Touch) -> bool:
    """Whether the root upon the circle leaves it as the delay grows while all others are clearly inside.

    False where the eigenvalues do not tell.
    """
    plant = sampled.scanned.sample(touch.delay)
    roots = _outer_roots(sampled, plant, reach)
    if roots is None:
        return False
    _, by_angle, by_scans = at_angle(sampled, plant, touch.angle)
    # how ωh moves with the delay; abs z = e^(−Im ωh)
    moves = -by_scans / by_angle
    if not moves.imag < -CLEARLY * abs(moves):
        return False
    upon = np.exp(1j * touch.angle)
    distance = np.minimum(np.abs(roots - upon), np.abs(roots - np.conj(upon)))
    own = np.argsort(distance)[: 1 if touch.angle == math.pi else 2]
    # the root that is known says how far eigenvalues are off here
    clear = max(CLEARLY, 100.0 * float(distance[own].max()))
    return bool(np.abs(np.delete(roots, own)).max(initial=0.0) < 1.0 - clear)


def _outer_roots(sampled: SampledLoop, plant: SampledPlant, reach: float) -> Complexes | None:
    """Eigenvalues with this plant, all roots outside the circle among them; None where they are too many.

    `reach`: the angle of z above which there are none.
    """
    states, line = sampled_states(sampled.scanned, plant, with_spared_noise=False), plant.held_scans
    if line <= FEW_HELD:
        return np.linalg.eigvals(states.closed()[0]).astype(complex)
    points = points_for(reach, line)
    if points is None or points > MOST_POINTS:
        return None
    roots = np.linalg.eigvals(compressed(states, points)).astype(complex)
    return np.asarray(roots[resolved(np.angle(roots), line, points)])


def _least_on_grid(
    sampled: SampledLoop, divided: Divided, lowest: float, touching: list[_Touch]
) -> float | None:
    """The least delay at which a root leaves the circle, from the cells of the grid and counts between
    them.
    """
    interval, reach = sampled.scanned.interval, divided.reach()
    first = touching[0] if touching else None
    # within a whole turn of the lowest crossover every root that leaves has left
    limit = (2.0 * math.pi / lowest + 2.0) * interval if first is None else first.delay
    if limit > MAX_SCANS * interval:
        return None
    last_stable, tried = 0.0, 0
    for low, high in cells(sampled, angles_of_grid(lowest, divided.resonant), limit):
        if first is not None and low <= first.delay <= high and _first_to_leave(sampled, reach, first):
            return first.delay
        for delay in (max(low - interval / DIVIDED, 0.0), low, 0.5 * (low + high), high):
            if delay <= last_stable:
                continue
            count, tried = _unstable_roots(sampled, delay), tried + 1
            if tried > MAX_PROBES:
                return None
            if count is not None and count > 0:
                return _crossing(sampled, reach, last_stable, delay) or _by_counting(
                    sampled, last_stable, delay
                )
            last_stable = last_stable if count is None else delay
    return _confirmed(sampled, reach, touching[:1])


def _left_before(sampled: SampledLoop, reach: float, touch: _Touch) -> float | None:
    """Where the root that comes back at a touch has left the circle, no more than a scan before; None where
    it is not followed or not confirmed.
    """
    interval = sampled.scanned.interval
    angle, scans, step = touch.angle, touch.delay / interval, FIRST_STEP_BACK
    outside: float | None = None
    while step < min(1.0, scans):
        at = _phase_at_crossover(sampled, angle, scans - step)
        if at is None:
            return None
        if at[1] < 0:
            angle, outside = at[0], scans - step
        elif outside is not None:
            angle, scans = _halved(sampled, at, scans - step, outside) or (angle, math.nan)
            left = _Touch(scans * interval, angle)
            return left.delay if scans > 0 and _first_to_leave(sampled, reach, left) else None
        step *= 1.5
    return None


def _crossing(sampled: SampledLoop, reach: float, low: float, high: float) -> float | None:
    """Where the first root leaves the circle between two delays, by Newton; None where not confirmed."""
    at_high = _loop_with(sampled, high)
    if at_high is None:
        return None
    interval = sampled.scanned.interval
    touching = []
    for omega in AxisResponse.of(at_high).gain_crossovers.tolist():
        solution = _newton(sampled, 2.0 * math.atan(omega), high / interval)
        if solution is not None and low <= solution[1] * interval <= high:
            touching.append(_Touch(solution[1] * interval, solution[0]))
    for touch in sorted(touching):
        if _first_to_leave(sampled, reach, touch):
            return touch.delay
    return None


def _by_counting(sampled: SampledLoop, low: float, high: float) -> float | None:
    """Where the first root leaves the circle, between a delay with none outside and one with some."""
    for _ in range(60):
        middle = 0.5 * (low + high)
        count = _unstable_roots(sampled, middle)
        if count is None:
            # a root upon the circle, as nearly as float64 tells
            return middle if high - low <= 1e-6 * high else None
        low, high = (low, middle) if count > 0 else (middle, high)
        if high - low <= 1e-12 * high:
            break
    return 0.5 * (low + high)


def _unstable_roots(sampled: SampledLoop, delay: float) -> int | None:
    """How many roots lie outside the circle with so much extra delay; None where that is not told."""
    if len(sampled.plant.c) <= FEW_LAGS:
        roots = _outer_roots(sampled, sampled.scanned.sample(delay), math.pi)
        if roots is not None and np.all(np.abs(np.abs(roots) - 1.0) > FAR_FROM_CIRCLE):
            return int(np.count_nonzero(np.abs(roots) > 1.0))
    loop = _loop_with(sampled, delay)
    return None if loop is None else count_right_of_axis(AxisResponse.of(loop)).roots


def _loop_with(sampled: SampledLoop, delay: float) -> OpenLoop | None:
    """The loop with so much extra delay; None where its zeros are not known well enough."""
    try:
        return form_sampled_loop(sampled.scanned, delay).loop
    except NotFactoredError:
        return None


def _solved(sampled: SampledLoop, angle: float) -> _Touch | None:
    """The solution with the least extra delay > 0 near the angle; None where none is found."""
    scanned = sampled.scanned
    phase = (sampled.loop.at_frequency(math.tan(0.5 * angle))[0].imag + math.pi) % (2.0 * math.pi)
    for turns in (0, 1):
        start = (phase + 2.0 * math.pi * turns) / angle
        solution = _newton(sampled, angle, start) or _bracketed(sampled, angle, start)
        if solution is not None and solution[1] > 64 * EPSILON * max(scanned.delay / scanned.interval, 1.0):
            return _Touch(solution[1] * scanned.interval, solution[0])
    return None


def _newton(sampled: SampledLoop, angle: float, scans: float) -> tuple[float, float] | None:
    """(ωh, δ/h) where 1 + L = 0."""
    interval = sampled.scanned.interval
    for _ in range(STEPS):
        plant = sampled.scanned.sample(max(scans, 0.0) * interval)
        residual, by_angle, by_scans = at_angle(sampled, plant, angle)
        determinant = by_angle.real * by_scans.imag - by_angle.imag * by_scans.real
        if not math.isfinite(determinant) or determinant == 0:
            return None
        turn = (residual.real * by_scans.imag - residual.imag * by_scans.real) / determinant
        more = (by_angle.real * residual.imag - by_angle.imag * residual.real) / determinant
        angle = min(max(angle - turn, 0.5 * angle), math.pi)
        scans -= max(-1.0, min(1.0, more))
        if abs(turn) <= NEWTON_DONE * angle and abs(more) <= NEWTON_DONE * max(1.0, scans):
            return angle, scans
    return None


def _bracketed(sampled: SampledLoop, angle: float, scans: float) -> tuple[float, float] | None:
    """The same where the plant comes to rest within a scan, so that only some divisions of a scan matter.

    The phase beyond −180° at the gain crossover, followed over two scans on either side, is halved to its
    zero.
    """
    if scans > MAX_SCANS:
        return None
    step = 0.125
    low = max(0.0, scans - 2.0)
    at_low = _phase_at_crossover(sampled, angle, low)
    while at_low is not None and low < scans + 2.0:
        high = low + step
        at_high = _phase_at_crossover(sampled, at_low[0], high)
        if at_high is not None and at_low[1] >= 0 > at_high[1] > -0.5 * math.pi:
            return _halved(sampled, at_low, low, high)
        low, at_low = high, at_high
    return None


def _halved(
    sampled: SampledLoop, at_low: tuple[float, float], low: float, high: float
) -> tuple[float, float] | None:
    angle = at_low[0]
    for _ in range(60):
        middle = 0.5 * (low + high)
        at_middle = _phase_at_crossover(sampled, angle, middle)
        if at_middle is None:
            return None
        angle = at_middle[0]
        low, high = (middle, high) if at_middle[1] >= 0 else (low, middle)
        if high - low <= 1e-13 * high:
            break
    return angle, 0.5 * (low + high)


def _phase_at_crossover(sampled: SampledLoop, angle: float, scans: float) -> tuple[float, float] | None:
    """(ωh, phase beyond −180°) where abs L = 1 with so much extra dead time; None where it is not found."""
    plant = sampled.scanned.sample(scans * sampled.scanned.interval)
    for _ in range(STEPS):
        residual, by_angle, _ = at_angle(sampled, plant, angle)
        step = residual.real / by_angle.real if by_angle.real else math.nan
        if abs(step) <= 1e-14 or abs(residual.real) <= 16 * EPSILON:
            return angle, residual.imag
        angle = min(max(angle - step, 0.7 * angle), 1.3 * angle, math.pi)
    return None
