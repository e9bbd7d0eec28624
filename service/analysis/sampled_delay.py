"""The delay margin of a loop at its scans: the least extra dead time at which a root reaches the unit circle.

More dead time is not just more phase here: where it divides a scan the sampled plant itself changes. So the
condition 1 + L(e^(jωh), δ) = 0 is solved for frequency and extra dead time together by Newton. Where every
gain crossover lies far below the scan's frequency there is one solution for each, and it is started from
there; elsewhere abs L moves with the division of the scan, a crossover may meet −1 several times within one,
and all solutions are found first by the turns of 1 + L about the cells of a grid over both. The least
solution is confirmed by counting roots on both sides.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, Complexes, Reals
from service.analysis.nyquist import count_right_of_axis
from service.analysis.results import Quantity
from service.analysis.sampled_loop import NotFactoredError, SampledLoop, form_sampled_loop
from service.analysis.scan import SampledPlant

DIVISIONS = (0.0, 0.2, 0.4, 0.6, 0.8)
"""Fractions of a scan at which gain crossovers are looked for, beside the loop's own."""

BESIDE = 1e-7
"""Roots are counted this much before and behind the margin, relatively."""

STEPS = 30

FAR_BELOW = 0.25
SLOW_PLANT = 0.5
"""A crossover at this angle ωh and below, with abs λ·h of the plant no larger than this, hardly moves in a
scan.
"""

PROBES = 16
"""Counts before a solution where the plant is fast and the crossover slow against the scan."""

MAX_SCANS = 400
"""Work bound: the grid is not laid over more scans than this."""

DIVIDED, ANGLE_SHARE, ANGLE_STEP = 32, 0.06, 0.03
"""The grid: cells of a scan, and the longest steps of ωh, against itself and in itself."""

WHOLE_SCANS = 40
"""So many whole numbers of scans are tried next to a place where a plant that passes a step at once may
differ.
"""


def sampled_delay_margin_s(sampled: SampledLoop, axis: AxisResponse) -> Quantity:
    """The delay margin of a stable loop in seconds; None where counting does not confirm what was found."""
    starts = _starts(sampled, axis)
    if not starts:
        # abs L stays below 1 however the dead time divides a scan
        return "unbounded"
    touching = sorted(delay for angle in starts if (delay := _solved(sampled, angle)) is not None)
    if sampled.plant.d != 0:
        found = _least_with_jumps(sampled, touching)
    elif max(starts) <= FAR_BELOW and (_fastest(sampled) <= SLOW_PLANT or _none_before(sampled, touching)):
        found = _confirmed(sampled, touching)
    else:
        found = _least_on_grid(sampled, min(starts), touching[0] if touching else None)
    return None if found is None else found / sampled.scanned.parts.unit_rad_s


def _none_before(sampled: SampledLoop, touching: list[float]) -> bool:
    """Whether no root is outside the circle at any of some delays before the first solution."""
    if not touching:
        return False
    probes = touching[0] * (np.arange(1, PROBES + 1) / (PROBES + 0.37))
    return all(_unstable_roots(sampled, delay) == 0 for delay in probes.tolist())


def _fastest(sampled: SampledLoop) -> float:
    """Largest abs λ·h of the plant."""
    return float(np.abs(sampled.scanned.parts.plant.poles_rad_s).max(initial=0.0)) * sampled.scanned.interval


def _confirmed(sampled: SampledLoop, touching: list[float]) -> float | None:
    """The first of the delays behind which there are unstable roots and before which there are none."""
    for delay in touching:
        before, behind = (_unstable_roots(sampled, delay * (1.0 + side)) for side in (-BESIDE, BESIDE))
        if before != 0 or behind is None:
            return None
        if behind > 0:
            return delay
    return None


def _least_on_grid(sampled: SampledLoop, lowest: float, limit: float | None) -> float | None:
    """The least delay at which a root leaves the circle, from the cells of the grid and counts between
    them.
    """
    if limit is not None and limit > MAX_SCANS * sampled.scanned.interval:
        return None
    probes = [edge for cell in _cells(sampled, lowest, limit) for edge in cell]
    if limit is not None:
        probes += [limit * (1.0 - BESIDE), limit * (1.0 + BESIDE)]
    last_stable, step = 0.0, sampled.scanned.interval / DIVIDED
    for delay in sorted(probes):
        count = _unstable_roots(sampled, delay)
        if count is None:
            return None
        if count > 0:
            nearer = max(last_stable, delay - step)
            return _by_counting(
                sampled, nearer if _unstable_roots(sampled, nearer) == 0 else last_stable, delay
            )
        last_stable = delay
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


def _least_with_jumps(sampled: SampledLoop, touching: list[float]) -> float | None:
    """The same for a plant that passes a step at once: at a whole number of scans that comes a scan later."""
    for jump in _jumps(sampled, touching[0] if touching else None):
        while touching and touching[0] < jump * (1.0 - BESIDE):
            if _unstable_roots(sampled, touching[0] * (1.0 + BESIDE)) != 0:
                return _confirmed(sampled, touching[:1])
            touching = touching[1:]
        count = _unstable_roots(sampled, jump)
        if count != 0:
            return jump if count else None
    return None


def _jumps(sampled: SampledLoop, touching: float | None) -> list[float]:
    """Extra dead times that make whole scans: the next ones, and those about a solution that lies far behind.

    In between the direct path comes no later than there, and the loop has more phase to spare.
    """
    scanned = sampled.scanned
    first = scanned.split_delay()[0] + 1
    numbers = list(range(first, first + WHOLE_SCANS))
    if touching is not None:
        about = scanned.split_delay(touching)[0]
        numbers += range(max(numbers[-1] + 1, about - WHOLE_SCANS), about + 2)
    return [number * scanned.interval - scanned.delay for number in numbers]


def _unstable_roots(sampled: SampledLoop, delay: float) -> int | None:
    try:
        loop = form_sampled_loop(sampled.scanned, delay).loop
    except NotFactoredError:
        return None
    return count_right_of_axis(AxisResponse.of(loop)).roots


def _starts(sampled: SampledLoop, axis: AxisResponse) -> list[float]:
    """Angles ωh near every gain crossover at any division of a scan."""
    own: list[float] = (2.0 * np.arctan(axis.gain_crossovers)).tolist()
    angles = 2.0 * np.arctan(axis.omega)
    # far below the scan's frequency the division of a scan moves abs L by no more than about the angle's
    # square
    logs = axis.log_response.real
    near = np.abs(logs) < 0.2 + 2.0 * angles**2
    near[:-1] |= near[1:]
    near[1:] |= near[:-1]
    chosen = np.append(angles[near], math.pi)
    scan = sampled.scanned
    delays = [(share - sampled.plant.fraction) % 1.0 * scan.interval for share in DIVISIONS]
    magnitude = np.abs([_Response(sampled, chosen, scan.sample(delay)).value for delay in delays])
    crossed = ((magnitude[:, :-1] > 1) != (magnitude[:, 1:] > 1)).any(axis=0)
    middles = 0.5 * (chosen[:-1] + chosen[1:])[crossed]
    lows, highs = chosen[:-1][crossed], chosen[1:][crossed]
    more = [
        float(middle)
        for low, middle, high in zip(lows, middles, highs, strict=True)
        if not any(low <= angle <= high for angle in own)
    ]
    at_nyquist = magnitude[:, -1] > 1
    if at_nyquist.any() and not at_nyquist.all():
        more.append(math.pi)
    return own + more


def _cells(sampled: SampledLoop, lowest: float, limit: float | None) -> Iterator[tuple[float, float]]:
    """Least and largest extra delay of every cell about which 1 + L turns, the least first; up to a little
    beyond `limit`, or through a whole turn of the lowest crossover.
    """
    interval, plant = sampled.scanned.interval, sampled.plant
    angles = _angles(lowest)
    shares = _shares(sampled)
    delays = [(share - plant.fraction) % 1.0 * interval for share in shares]
    divided = [sampled.scanned.sample(delay) for delay in delays]
    values = np.array([_Response(sampled, angles, replace(each, whole_scans=0)).value for each in divided])
    last = 2.0 * math.pi / lowest + 2.0 if limit is None else limit / interval
    for whole in range(plant.whole_scans, plant.whole_scans + math.ceil(min(last, MAX_SCANS)) + 2):
        rows = _rows_about_zero(1.0 + values * np.exp(-1j * whole * angles))
        for row in rows:
            low, high = (
                (whole + share - plant.whole_scans - plant.fraction) * interval
                for share in shares[row : row + 2]
            )
            if high > 0:
                yield max(low, 0.0), high


def _angles(lowest: float) -> Reals:
    """ωh from below the lowest crossover to the Nyquist frequency, where real roots reach the circle, and
    beyond it, in steps that are short in themselves and against ωh.
    """
    angles = [0.7 * lowest]
    while angles[-1] < math.pi:
        angles.append(angles[-1] + min(ANGLE_SHARE * angles[-1], ANGLE_STEP))
    # the Nyquist frequency lies in the middle of the last step
    scale = (math.pi - angles[0]) / (0.5 * (angles[-2] + angles[-1]) - angles[0])
    return np.asarray(angles[0] + scale * (np.array(angles) - angles[0]))


def _shares(sampled: SampledLoop) -> list[float]:
    """Divisions of a scan, closer where a fast plant answers to the last part of it."""
    even = np.linspace(0.0, 1.0, DIVIDED + 1)
    fastest = _fastest(sampled)
    if fastest > DIVIDED / 8:
        # e^(−λh(1−ε)) moves within some 1/(λh) before the whole scan
        even = np.concatenate([even, 1.0 - np.geomspace(0.1 / fastest, 1.0, DIVIDED)])
    shares = np.sort(even[(even >= 0) & (even < 1.0)])
    return [*shares[np.append(True, np.diff(shares) > 1e-9)].tolist(), 1.0 - 1e-9]


def _rows_about_zero(values: Complexes) -> list[int]:
    """The rows with a cell about whose boundary a function turns: a zero lies inside."""
    angle = np.angle(values)
    along, across = (_wrapped(np.diff(angle, axis=axis)) for axis in (1, 0))
    turn = along[:-1] + across[:, 1:] - along[1:] - across[:, :-1]
    return np.flatnonzero((np.abs(turn) > math.pi).any(axis=1)).tolist()


def _wrapped(angle: Reals) -> Reals:
    return np.asarray((angle + math.pi) % (2.0 * math.pi) - math.pi)


def _solved(sampled: SampledLoop, angle: float) -> float | None:
    """The least extra delay > 0 of a solution near the angle, in the loop's unit; None where none is
    found.
    """
    scanned = sampled.scanned
    here = _Response(sampled, np.array([angle]), sampled.plant)
    phase = (cmath.phase(complex(here.value[0])) + math.pi) % (2.0 * math.pi)
    for turns in (0, 1):
        start = (phase + 2.0 * math.pi * turns) / angle
        solution = _newton(sampled, angle, start) or _bracketed(sampled, angle, start)
        if solution is not None and solution[1] > 64 * EPSILON * max(scanned.delay / scanned.interval, 1.0):
            return solution[1] * scanned.interval
    return None


def _newton(sampled: SampledLoop, angle: float, scans: float) -> tuple[float, float] | None:
    """(ωh, δ/h) where 1 + L = 0."""
    interval = sampled.scanned.interval
    for _ in range(STEPS):
        plant = sampled.scanned.sample(max(scans, 0.0) * interval)
        at = _Response(sampled, np.array([angle]), plant)
        residual = complex(np.log(-at.value[0]))
        by_angle, by_scans = complex(at.slope_by_angle[0]), complex(at.slope_by_scans[0])
        determinant = by_angle.real * by_scans.imag - by_angle.imag * by_scans.real
        if not math.isfinite(determinant) or determinant == 0:
            return None
        turn = (residual.real * by_scans.imag - residual.imag * by_scans.real) / determinant
        more = (by_angle.real * residual.imag - by_angle.imag * residual.real) / determinant
        angle = min(max(angle - turn, 0.5 * angle), math.pi)
        scans -= max(-1.0, min(1.0, more))
        if abs(turn) <= 1e-13 and abs(more) <= 1e-12 * max(1.0, scans):
            return angle, scans
    return None


def _bracketed(sampled: SampledLoop, angle: float, scans: float) -> tuple[float, float] | None:
    """The same where the plant comes to rest within a scan, so that only some divisions of a scan matter.

    The phase beyond −180° at the gain crossover, followed over two scans on either side, is halved to its
    zero.
    """
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
        at = _Response(sampled, np.array([angle]), plant)
        residual = complex(np.log(-at.value[0]))
        step = residual.real / float(at.slope_by_angle[0].real)
        if abs(step) <= 1e-14:
            return angle, residual.imag
        angle = min(max(angle - step, 0.7 * angle), 1.3 * angle, math.pi)
    return None


@dataclass(frozen=True, eq=False)
class _Response:
    """L on the unit circle, straight from the plant's states, at angles ωh of shape (m,)."""

    sampled: SampledLoop
    angle: Reals
    plant: SampledPlant

    @property
    def value(self) -> Complexes:
        """L, (m,)."""
        controller = self.sampled.controller
        w = self._w
        logs = np.log(w[:, None] - controller.zeros).sum(1) - np.log(w[:, None] - controller.poles).sum(1)
        logs = logs + controller.log_gain - 1j * self.plant.whole_scans * self.angle
        sign = controller.sign * self.sampled.scanned.parts.direction
        return np.asarray(sign * np.exp(logs) * self._plant_value)

    @property
    def slope_by_angle(self) -> Complexes:
        """d ln L/d(ωh), (m,)."""
        controller, w, z, plant = self.sampled.controller, self._w, self._z, self.plant
        of_controller = (1.0 / (w[:, None] - controller.zeros)).sum(1)
        of_controller = of_controller - (1.0 / (w[:, None] - controller.poles)).sum(1)
        of_controller = of_controller * (0.5j * (1.0 - w * w))
        resolvent = self._resolvent
        forced = plant.gamma0 + plant.gamma1 / z[:, None]
        of_plant = -(resolvent @ (resolvent @ forced[..., None]))[..., 0] @ plant.c
        of_plant = of_plant - ((resolvent @ plant.gamma1) @ plant.c + plant.d) / z**2
        of_plant = of_plant * 1j * z / self._plant_value
        return np.asarray(of_controller + of_plant - 1j * plant.whole_scans)

    @property
    def slope_by_scans(self) -> Complexes:
        """d ln L/d(δ/h), (m,)."""
        through = (self._resolvent @ self.plant.gamma0_slope) @ self.plant.c
        return np.asarray(through * (1.0 / self._z - 1.0) / self._plant_value)

    @property
    def _w(self) -> Complexes:
        return np.asarray(1j * np.tan(0.5 * self.angle))

    @property
    def _z(self) -> Complexes:
        return np.asarray(np.exp(1j * self.angle))

    @property
    def _resolvent(self) -> Complexes:
        # z − 1 without the digits that z loses near 1
        less_one = np.expm1(1j * self.angle)[:, None, None] * np.eye(len(self.plant.c))
        return np.asarray(np.linalg.inv(less_one - self.plant.phi_less_one))

    @property
    def _plant_value(self) -> Complexes:
        plant, z = self.plant, self._z
        forced = plant.gamma0 + plant.gamma1 / z[:, None]
        return np.asarray((self._resolvent @ forced[..., None])[..., 0] @ plant.c + plant.d / z)
