"""The controller and the plant as they meet at the scan: discretisation, exact in the plant's dead time.

The controller and its filter are discretised by substitution, s → (z−1)/(h·z) or s → (2/h)·(z−1)/(z+1), term
by term, which is the same as substituting in the whole. The plant is sampled with a zero-order hold; its dead
time τ = k·h + ε·h, 0 ≤ ε < 1, splits the interval in which a held output acts. PV is read at the scan before
the new output is put out, so that a plant which passes a step at once shows it at the next scan.

Source: K. J. Åström, B. Wittenmark, Computer-Controlled Systems (3rd ed. 1997), section 2.3 (sampling with
dead time) and section 8.2 (approximation by substitution). From memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.controller import Scan
from service.analysis.exponentials import exponentials_less_one
from service.analysis.loop import ClosedLoopParts, Reals
from service.analysis.realisation import plant_state_space

WHOLE = 1e-12
"""A dead time that is as near as this, relatively, to a whole number of scans is that number."""


@dataclass(frozen=True, slots=True)
class Section:
    """b0 + (b1 + a·b0)/(z − a): one discretised term of the controller."""

    b0: float
    b1: float
    a: float

    @property
    def gain_of_state(self) -> float:
        """What the input adds to the state."""
        return self.b1 + self.a * self.b0


@dataclass(frozen=True, eq=False)
class SampledPlant:
    """The plant over one scan: x⁺ = Φ·x + Γ0·w[n−k] + Γ1·w[n−k−1], PV = c·x + d·w[n−k−1], w the held output.

    `phi_less_one` Φ − 1 (n, n), `gamma0`, `gamma1`, `c` (n,). `whole_scans` k; `fraction` ε.
    `gamma0_slope` (n,): −dΓ0/dε = dΓ1/dε.
    """

    phi_less_one: Reals
    gamma0: Reals
    gamma1: Reals
    gamma0_slope: Reals
    c: Reals
    d: float
    whole_scans: int
    fraction: float

    @property
    def held_scans(self) -> int:
        """How many past outputs act on the plant: k, and one more where the dead time divides a scan."""
        return self.whole_scans + (1 if self.fraction > 0 or self.d != 0 else 0)


@dataclass(frozen=True, eq=False)
class Scanned:
    """A loop and its scan, in the loop's own unit of time. `plant`: (a, b, c, d) of the plant without dead
    time.

    `delay`: dead time of the plant and the delay of the output together.
    """

    parts: ClosedLoopParts
    plant: tuple[Reals, Reals, Reals, float]
    interval: float
    trapezoidal: bool
    delay: float

    @staticmethod
    def of(parts: ClosedLoopParts, scan: Scan) -> Scanned:
        """The loop with its scan brought to the loop's unit of time.

        Raises OverflowError where interval or delay leave float64.
        """
        unit = parts.unit_rad_s
        interval, delay = scan.interval_s * unit, parts.dead_time + scan.output_delay_s * unit
        if not (0.0 < interval < math.inf and delay / interval < math.inf and 2.0 / interval > 0.0):
            raise OverflowError("the scan interval leaves the range of float64")
        return Scanned(
            parts=parts,
            plant=plant_state_space(parts.plant),
            interval=interval,
            trapezoidal=scan.method == "trapezoidal",
            delay=delay,
        )

    def integrator(self) -> Section:
        """1/s."""
        h = self.interval
        return Section(h / 2, h / 2, 1.0) if self.trapezoidal else Section(h, 0.0, 1.0)

    def differentiator(self, filter_time: float) -> Section:
        """s/(1 + filter_time·s)."""
        h = self.interval
        if self.trapezoidal:
            b0 = 2.0 / (h + 2 * filter_time)
            return Section(b0, -b0, (2 * filter_time - h) / (2 * filter_time + h))
        b0 = 1.0 / (h + filter_time)
        return Section(b0, -b0, filter_time * b0)

    def lag(self, time: float) -> Section:
        """1/(1 + time·s)."""
        h = self.interval
        if self.trapezoidal:
            b0 = h / (h + 2 * time)
            return Section(b0, b0, (2 * time - h) / (2 * time + h))
        return Section(h / (h + time), 0.0, time / (h + time))

    def split_delay(self, extra: float = 0.0) -> tuple[int, float]:
        """(k, ε) of the delay with `extra` added: k whole scans and a fraction 0 ≤ ε < 1."""
        scans = (self.delay + extra) / self.interval
        nearest = round(scans)
        if abs(scans - nearest) <= WHOLE * max(1.0, scans):
            return nearest, 0.0
        return math.floor(scans), scans - math.floor(scans)

    def sample(self, extra_delay: float = 0.0) -> SampledPlant:
        """The plant over one scan, with its delay lengthened by `extra_delay`."""
        return self.samples([extra_delay])[0]

    def samples(self, extra_delays: Sequence[float]) -> list[SampledPlant]:
        """The plant over one scan for each of several extra delays."""
        a, b, c, d = self.plant
        n = len(a)
        split = [self.split_delay(extra) for extra in extra_delays]
        shares = [share for _, fraction in split for share in (fraction, 1.0 - fraction)]
        over = exponentials_less_one(augmented(a, b), self.interval * np.array([*shares, 1.0]))
        first, second = over[:-1:2, :n, n], over[1::2]
        to_end = second[:, :n, :n]
        gamma1 = first + (to_end @ first[..., None])[..., 0]
        slope = self.interval * (b + to_end @ b)
        delayed = zip(split, second[:, :n, n], gamma1, slope, strict=True)
        return [
            SampledPlant(over[-1, :n, :n], gamma0, late, by_fraction, c, d, whole, fraction)
            for (whole, fraction), gamma0, late, by_fraction in delayed
        ]


def augmented(a: Reals, b: Reals) -> Reals:
    """The state with a constant input as a further state, (n+1, n+1)."""
    n = len(a)
    matrix = np.zeros((n + 1, n + 1))
    matrix[:n, :n], matrix[:n, n] = a, b
    return matrix
