"""L on the unit circle as dead time grows, straight from the plant's states, however it divides a scan."""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import Complexes, Reals
from service.analysis.sampled_loop import SampledLoop
from service.analysis.scan import SampledPlant

FEWEST_DIVISIONS = 5
"""Into so many parts of a scan and more, as its plant swings, dead time is divided to look for gain
crossovers.
"""

DIVISION_RAD = 0.5
"""A mode of the plant swings no farther between two divisions."""

CLEARLY_BELOW = 0.5
"""A root leaves the circle where abs L is 1: none is looked for where abs L is below this."""

LIGHT = 0.5
"""A mode of the plant that dies away by fewer nepers than this within a scan makes a narrow resonance."""

NEAR_ONE = -math.log(CLEARLY_BELOW)
"""Nepers about 1 within which abs L is looked at, beside what the division of a scan may move it by."""


class AtAngle(NamedTuple):
    """ln(−L), its angle in (−π, π], and d ln L/d(ωh) and d ln L/d(δ/h), at one angle ωh; not numbers upon a
    zero or pole.
    """

    log_of_negative: complex
    by_angle: complex
    by_scans: complex


NOWHERE = AtAngle(complex(math.nan, math.nan), complex(math.nan, math.nan), complex(math.nan, math.nan))


def at_angle(sampled: SampledLoop, plant: SampledPlant, angle: float) -> AtAngle:
    """The loop with this plant over one scan at one angle, in plain numbers wherever it is not the plant."""
    controller, z = sampled.controller, cmath.exp(1j * angle)
    # z − 1 without the digits that z loses near 1
    z_less_one = complex(np.expm1(1j * angle))
    log, by_z = complex(controller.log_gain, -plant.whole_scans * angle), 0j
    for roots, weight in ((controller.zeros.tolist(), 1.0), (controller.poles.tolist(), -1.0)):
        for root in roots:
            # w − r is this by (z + 1)
            factor = (1.0 - root) * z_less_one - 2.0 * root
            if factor == 0:
                return NOWHERE
            log += weight * cmath.log(factor)
            by_z += weight * (1.0 - root) / factor
    if excess := len(controller.zeros) - len(controller.poles):
        log -= excess * cmath.log(z + 1.0)
        by_z -= excess / (z + 1.0)
    less_one = z_less_one * np.eye(len(plant.c)) - plant.phi_less_one
    resolvent = np.linalg.inv(less_one)
    row = plant.c @ resolvent
    late = complex(row @ plant.gamma1) + plant.d
    own = complex(row @ plant.gamma0) + late / z
    if own == 0 or not math.isfinite(log.imag):
        return NOWHERE
    log += cmath.log(-controller.sign * sampled.scanned.parts.direction * own)
    of_plant = -complex(row @ resolvent @ (plant.gamma0 + plant.gamma1 / z)) - late / z**2
    by_angle = 1j * z * (by_z + of_plant / own) - 1j * plant.whole_scans
    by_scans = complex(row @ plant.gamma0_slope) * (1.0 / z - 1.0) / own
    return AtAngle(complex(log.real, math.remainder(log.imag, 2.0 * math.pi)), by_angle, by_scans)


@dataclass(frozen=True, eq=False)
class OnCircle:
    """L on the unit circle at angles ωh of shape (m,), straight from the states of plants over one scan.

    What plants with other delays have in common is computed once.
    """

    sampled: SampledLoop
    angle: Reals

    def values(self, plants: list[SampledPlant]) -> Complexes:
        """L with each of several plants, (plants, m)."""
        row, z = self._row, self._z[:, None]
        gamma0, gamma1 = (
            np.array([each.gamma0 for each in plants]),
            np.array([each.gamma1 for each in plants]),
        )
        whole_scans = np.array([plant.whole_scans for plant in plants], np.float64)
        own = row @ gamma0.T + (row @ gamma1.T + self.sampled.plant.d) / z
        turned = np.exp(-1j * self.angle[:, None] * whole_scans)
        return np.asarray((self._controller[:, None] * turned * own).T)

    @cached_property
    def _controller(self) -> Complexes:
        """Controller, filter and direction, (m,)."""
        controller, w = self.sampled.controller, self._w
        logs = np.log(w[:, None] - controller.zeros).sum(1) - np.log(w[:, None] - controller.poles).sum(1)
        sign = controller.sign * self.sampled.scanned.parts.direction
        return np.asarray(sign * np.exp(logs + controller.log_gain))

    @cached_property
    def _w(self) -> Complexes:
        return np.asarray(1j * np.tan(0.5 * self.angle))

    @cached_property
    def _z(self) -> Complexes:
        return np.asarray(np.exp(1j * self.angle))

    @cached_property
    def _row(self) -> Complexes:
        """c·(z − Φ)⁻¹, (m, n)."""
        less_one = np.expm1(1j * self.angle)[:, None, None] * np.eye(len(self.sampled.plant.c))
        return np.asarray(self.sampled.plant.c @ np.linalg.inv(less_one - self.sampled.plant.phi_less_one))


def swinging_modes(sampled: SampledLoop, alive: float = LIGHT) -> Reals:
    """Im λ·h > 0 of the plant's modes that swing and die away by fewer nepers than this within a scan."""
    modes = np.array(sampled.scanned.parts.plant.poles_rad_s, complex) * sampled.scanned.interval
    fading = np.abs(modes.real)
    return np.asarray(modes.imag[(modes.imag > fading) & (fading < alive)])


@dataclass(frozen=True, eq=False)
class Divided:
    """abs L for dead times that divide a scan in several ways, (divisions, m), at angles ωh, (m,).

    Those of the axis wherever abs L may come near 1, and the Nyquist frequency's. `resonant`: those about the
    plant's light resonances, as they look at the scans.
    """

    angles: Reals
    magnitude: Reals
    resonant: Reals

    @staticmethod
    def of(sampled: SampledLoop, axis: AxisResponse) -> Divided:
        """Those of a loop at the frequencies of its axis."""
        scan, angles = sampled.scanned, 2.0 * np.arctan(axis.omega)
        # far below the scan's frequency the division of a scan moves abs L by no more than about the angle's
        # square
        near = np.abs(axis.log_response.real) < NEAR_ONE + 2.0 * angles**2
        swings, resonant = swinging_modes(sampled), np.zeros(len(angles), bool)
        for alias in np.abs(np.mod(swings + math.pi, 2.0 * math.pi) - math.pi).tolist():
            # one beyond the Nyquist frequency looks like a slow one
            resonant |= np.abs(angles - alias) < 0.5 * alias
        near |= resonant
        near[:-1] |= near[1:]
        near[1:] |= near[:-1]
        here = OnCircle(sampled, np.append(angles[near], math.pi))
        count = max(FEWEST_DIVISIONS, math.ceil(float(swings.max(initial=0.0)) / DIVISION_RAD))
        delays = (np.arange(count) / count - sampled.plant.fraction) % 1.0 * scan.interval
        return Divided(here.angle, np.abs(here.values(scan.samples(delays.tolist()))), angles[resonant])

    def reach(self) -> float:
        """The largest angle at which abs L is not clearly below 1 at some division; 0 where there is none."""
        return float(self.angles[(self.magnitude >= CLEARLY_BELOW).any(axis=0)].max(initial=0.0))

    def starts(self, axis: AxisResponse) -> list[float]:
        """Angles near every gain crossover at any division."""
        own: list[float] = (2.0 * np.arctan(axis.gain_crossovers)).tolist()
        above = self.magnitude > 1
        crossed = np.flatnonzero((above[:, :-1] != above[:, 1:]).any(axis=0))
        more = [
            0.5 * (low + high)
            for low, high in zip(
                self.angles[crossed].tolist(), self.angles[crossed + 1].tolist(), strict=True
            )
            if not any(low <= angle <= high for angle in own)
        ]
        at_nyquist = above[:, -1]
        if at_nyquist.any() and not at_nyquist.all():
            more.append(math.pi)
        return own + more
