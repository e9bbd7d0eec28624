"""L on the unit circle as dead time grows, straight from the plant's states, however it divides a scan."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import Complexes, Reals
from service.analysis.sampled_loop import SampledLoop
from service.analysis.scan import SampledPlant

DIVISIONS = (0.0, 0.2, 0.4, 0.6, 0.8)
"""Fractions of a scan at which gain crossovers are looked for, beside the loop's own."""

CLEARLY_BELOW = 0.5
"""A root leaves the circle where abs L is 1: none is looked for where abs L is below this."""

NEAR_ONE = -math.log(CLEARLY_BELOW)
"""Nepers about 1 within which abs L is looked at, beside what the division of a scan may move it by."""


@dataclass(frozen=True, eq=False)
class OnCircle:
    """L on the unit circle at angles ωh of shape (m,), straight from the states of a plant over one scan.

    What plants with other delays have in common is computed once.
    """

    sampled: SampledLoop
    angle: Reals

    def value(self, plant: SampledPlant) -> Complexes:
        """L with this plant, (m,)."""
        return np.asarray(self.values([plant])[0])

    def values(self, plants: list[SampledPlant]) -> Complexes:
        """L with each of several plants, (plants, m)."""
        row, z = self._row, self._z[:, None]
        gamma0, gamma1 = (
            np.array(gammas).T for gammas in zip(*((p.gamma0, p.gamma1) for p in plants), strict=True)
        )
        whole_scans = np.array([plant.whole_scans for plant in plants], np.float64)
        own = row @ gamma0 + (row @ gamma1 + self.sampled.plant.d) / z
        turned = np.exp(-1j * self.angle[:, None] * whole_scans)
        return np.asarray((self._controller[:, None] * turned * own).T)

    def slopes(self, plant: SampledPlant) -> tuple[Complexes, Complexes]:
        """(d ln L/d(ωh), d ln L/d(δ/h)), (m,) each."""
        controller, w, z = self.sampled.controller, self._w, self._z
        of_controller = (1.0 / (w[:, None] - controller.zeros)).sum(1)
        of_controller = of_controller - (1.0 / (w[:, None] - controller.poles)).sum(1)
        of_controller = of_controller * (0.5j * (1.0 - w * w))
        own = self._of(plant)
        forced = plant.gamma0 + plant.gamma1 / z[:, None]
        of_plant = -(self._row[:, None, :] @ self._resolvent @ forced[..., None])[:, 0, 0]
        of_plant = of_plant - (self._row @ plant.gamma1 + plant.d) / z**2
        by_angle = of_controller + of_plant * 1j * z / own - 1j * plant.whole_scans
        by_scans = self._row @ plant.gamma0_slope * (1.0 / z - 1.0) / own
        return np.asarray(by_angle), np.asarray(by_scans)

    def _of(self, plant: SampledPlant) -> Complexes:
        """The plant but for its whole scans of dead time, (m,)."""
        row, z = self._row, self._z
        return np.asarray(row @ plant.gamma0 + (row @ plant.gamma1 + plant.d) / z)

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
    def _resolvent(self) -> Complexes:
        """(z − Φ)⁻¹, (m, n, n)."""
        # z − 1 without the digits that z loses near 1
        less_one = np.expm1(1j * self.angle)[:, None, None] * np.eye(len(self.sampled.plant.c))
        return np.asarray(np.linalg.inv(less_one - self.sampled.plant.phi_less_one))

    @cached_property
    def _row(self) -> Complexes:
        """c·(z − Φ)⁻¹, (m, n)."""
        return np.asarray(self.sampled.plant.c @ self._resolvent)


@dataclass(frozen=True, eq=False)
class Divided:
    """abs L for dead times that divide a scan in several ways, (divisions, m), at angles ωh, (m,).

    Those of the axis wherever abs L may come near 1, and the Nyquist frequency's.
    """

    angles: Reals
    magnitude: Reals

    @staticmethod
    def of(sampled: SampledLoop, axis: AxisResponse) -> Divided:
        """Those of a loop at the frequencies of its axis."""
        angles = 2.0 * np.arctan(axis.omega)
        # far below the scan's frequency the division of a scan moves abs L by no more than about the angle's
        # square
        near = np.abs(axis.log_response.real) < NEAR_ONE + 2.0 * angles**2
        near[:-1] |= near[1:]
        near[1:] |= near[:-1]
        angles = np.append(angles[near], math.pi)
        scan, here = sampled.scanned, OnCircle(sampled, angles)
        delays = [(share - sampled.plant.fraction) % 1.0 * scan.interval for share in DIVISIONS]
        return Divided(angles, np.abs(here.values(scan.samples(delays))))

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
