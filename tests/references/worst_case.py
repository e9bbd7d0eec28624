"""The worst member of a box of models by dense search: members one by one, each on a dense grid of frequency.

A member multiplies the plant's gain by k, turns P(s) into fⁿ·P(f·s), n its poles minus zeros at the origin,
and multiplies and lengthens its dead time. What is found is attained by a member, so a proven bound may not
be on the wrong side of it. The best member of a grid over the box is improved by a search without
derivatives.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.optimize import minimize

from tests.references.told import ExactLoop, exact_loop

POINTS_A_DECADE = 260
POINTS_A_TURN = 40
MOST_POINTS = 30_000

Member = tuple[float, float, float]
"""ln k, ln f, dead time in seconds."""


@dataclass(frozen=True)
class MemberMargins:
    """Margins of one member; inf where there is no crossing."""

    max_sensitivity: float
    gain_margin: float
    phase_margin_deg: float
    delay_margin_s: float


class Box:
    """A plant with uncertainty under a controller, every member of it open to be tried."""

    def __init__(self, plant: Any, controller: Any) -> None:
        loop: ExactLoop = exact_loop(plant, controller)
        self.plant_numerator = np.array([float(c) for c in loop.plant_numerator])
        self.plant_denominator = np.array([float(c) for c in loop.plant_denominator])
        self.numerator = np.array([float(c) for c in loop.numerator])
        self.denominator = np.array([float(c) for c in loop.denominator])
        box, entered = plant.uncertainty, float(plant.dead_time_s)
        self.ranges = (
            (math.log(box.gain[0]), math.log(box.gain[1])),
            (math.log(box.time_constants[0]), math.log(box.time_constants[1])),
            (entered * box.dead_time[0], entered * box.dead_time[1] + box.dead_time_extra_s[1]),
        )
        self.order = _at_origin(self.plant_denominator) - _at_origin(self.plant_numerator)
        self.omega = self._frequencies()

    def _frequencies(self) -> Any:
        roots = np.concatenate([np.roots(self.numerator), np.roots(self.denominator)])
        sizes = np.abs(roots[np.abs(roots) > 1e-9])
        longest = self.ranges[2][1]
        marks = [*sizes.tolist(), *([1.0 / longest] if longest else [])]
        marks = marks or [1.0]
        spread = math.exp(max(abs(end) for end in self.ranges[1]))
        low, high = math.log10(1e-3 * min(marks) / spread), math.log10(1e3 * max(marks) * spread)
        omega = np.logspace(low, high, int((high - low) * POINTS_A_DECADE))
        parts = [omega]
        for root in roots:
            if root.imag > 0 and abs(root.real) < 0.3 * root.imag:
                # a resonance moves with the time constants
                width = max(abs(root.real), 1e-4 * root.imag) / root.imag
                steps = int(min(4000, 8.0 * (self.ranges[1][1] - self.ranges[1][0] + 0.5) / width))
                parts.append(root.imag * np.exp(np.linspace(-0.25, 0.25, steps) - self.ranges[1][1]))
                parts.append(root.imag * np.exp(np.linspace(-0.25, 0.25, steps) - self.ranges[1][0]))
                parts.append(root.imag * np.linspace(0.8, 1.25, steps))
        if longest:
            turns = 2.0 * math.pi / longest
            parts.append(np.arange(0.0, min(40.0 * turns, 10**high), turns / POINTS_A_TURN)[1:])
        return np.unique(np.concatenate(parts))[:MOST_POINTS]

    def _plant(self, omega: Any, member: Member) -> tuple[Any, Any]:
        k, f = math.exp(member[0]), math.exp(member[1])
        numerator, denominator = (
            np.polyval(self.plant_numerator, 1j * omega * f),
            np.polyval(self.plant_denominator, 1j * omega * f),
        )
        return k * f**self.order * numerator, denominator

    def response(self, omega: Any, member: Member) -> Any:
        """L(jω) of a member."""
        s = 1j * omega
        above, below = self._plant(omega, member)
        fixed = np.polyval(self.numerator, s) / np.polyval(self.plant_numerator, s)
        fixed = fixed * np.polyval(self.plant_denominator, s) / np.polyval(self.denominator, s)
        return fixed * above / below * np.exp(-s * member[2])

    def unstable_roots(self, member: Member) -> int | None:
        """Characteristic roots right of the axis, by the turning of D + N·e^(−sθ); None where it is not
        clear.

        For loops that roll off or are without dead time, and have no zero of their plant on the axis.
        """
        # a slow root is known only by where the function has become real
        first = math.log10(self.omega[0])
        omega = np.concatenate([np.logspace(first - 8.0, first, 400)[:-1], self.omega])
        for _ in range(14):
            s = 1j * omega
            above, below = self._plant(omega, member)
            numerator = np.polyval(self.numerator, s) / np.polyval(self.plant_numerator, s) * above
            denominator = np.polyval(self.denominator, s) / np.polyval(self.plant_denominator, s) * below
            function = denominator + numerator * np.exp(-s * member[2])
            turns = np.angle(function[1:] / function[:-1])
            wide = np.flatnonzero(np.abs(turns) > 0.6)
            if not wide.size:
                break
            omega = np.sort(np.concatenate([omega, np.sqrt(omega[wide] * omega[wide + 1])]))
        else:
            return None
        degree = max(len(self.denominator), len(self.numerator) if member[2] == 0 else 0) - 1
        # from ω = 0, where the function is real, and to infinity, where it is its leading term
        start = np.angle(function[0]) if abs(np.angle(function[0])) < 1 else np.angle(-function[0])
        last = np.polyval(self.denominator, 1j * omega[-1])
        leading = np.sign(self.denominator[0]) * 1j ** (len(self.denominator) - 1)
        rest = np.angle(leading / (last / np.abs(last)))
        count = degree / 2 - (start + turns.sum() + rest) / math.pi
        return round(count) if abs(count - round(count)) < 0.1 else None

    def margins(self, member: Member) -> MemberMargins:
        """Margins of one member: crossings and peaks of the dense grid, each sought again on a finer one."""
        response = self.response(self.omega, member)
        magnitude, phase = np.log(np.abs(response)), np.angle(-response)
        crossed = self._finer(np.flatnonzero((magnitude[:-1] > 0) != (magnitude[1:] > 0)), member, 0)
        angles, frequencies = np.angle(-self.response(crossed, member)), crossed
        # where −L is real and positive: its phase passes 0 without a jump of a turn
        passes = ((phase[:-1] > 0) != (phase[1:] > 0)) & (np.abs(np.diff(phase)) < 3.0)
        at = np.log(np.abs(self.response(self._finer(np.flatnonzero(passes), member, 1), member)))
        below = at[at < 0]
        return MemberMargins(
            max_sensitivity=self._peak(1.0 / np.abs(1.0 + response), member),
            gain_margin=float(np.exp(-below.max())) if below.size else math.inf,
            phase_margin_deg=float(np.degrees(np.abs(angles)).min()) if angles.size else math.inf,
            delay_margin_s=float(((angles % (2.0 * math.pi)) / frequencies).min())
            if angles.size
            else math.inf,
        )

    def _finer(self, places: Any, member: Member, which: int) -> Any:
        """Frequencies where ln abs L (0) or arg −L (1) is 0, each within its step of the grid."""
        low, high = self.omega[places], self.omega[places + 1]
        if not places.size:
            return low
        for _ in range(6):
            share = np.linspace(0.0, 1.0, 24)[:, None]
            omega = low + (high - low) * share
            response = self.response(omega.ravel(), member).reshape(omega.shape)
            values = np.angle(-response) if which else np.log(np.abs(response))
            first = np.argmax((values[:-1] > 0) != (values[1:] > 0), axis=0)
            columns = np.arange(len(places))
            low, high = omega[first, columns], omega[first + 1, columns]
        return 0.5 * (low + high)

    def _peak(self, values: Any, member: Member) -> float:
        top = int(np.argmax(values))
        best = float(values[top])
        low, high = self.omega[max(top - 1, 0)], self.omega[min(top + 1, len(values) - 1)]
        for _ in range(3):
            omega = np.linspace(low, high, 25)
            values = 1.0 / np.abs(1.0 + self.response(omega, member))
            top = int(np.argmax(values))
            best = max(best, float(values[top]))
            low, high = omega[max(top - 1, 0)], omega[min(top + 1, 24)]
        return best

    def worst(self, steps: tuple[int, int, int] = (3, 9, 4)) -> MemberMargins:
        """The worst of each margin over a grid of the box, improved from its best members."""
        counts = [count if high > low else 1 for (low, high), count in zip(self.ranges, steps, strict=True)]
        axes = [np.linspace(*ends, count) for ends, count in zip(self.ranges, counts, strict=True)]
        grid = [(float(k), float(f), float(dead_time)) for k, f, dead_time in itertools.product(*axes)]
        found = [self.margins(member) for member in grid]
        return MemberMargins(
            max_sensitivity=-self._improved(grid, found, lambda margins: -margins.max_sensitivity),
            gain_margin=self._improved(grid, found, lambda margins: margins.gain_margin),
            phase_margin_deg=self._improved(grid, found, lambda margins: margins.phase_margin_deg),
            delay_margin_s=self._improved(grid, found, lambda margins: margins.delay_margin_s),
        )

    def _improved(
        self, grid: list[Member], found: list[MemberMargins], value: Callable[[MemberMargins], float]
    ) -> float:
        """The least value from the best member of the grid on, by Nelder and Mead's simplex."""
        values = [value(margins) for margins in found]
        best = int(np.argmin(values))
        low, high = (np.array([ends[side] for ends in self.ranges]) for side in (0, 1))
        free = np.flatnonzero(high > low)
        if not math.isfinite(values[best]) or not free.size:
            return values[best]
        start = np.array(grid[best])

        def at(share: Any) -> float:
            member = start.copy()
            member[free] = low[free] + np.clip(share, 0.0, 1.0) * (high - low)[free]
            met = value(self.margins((float(member[0]), float(member[1]), float(member[2]))))
            return met if math.isfinite(met) else 1e300

        share = (start[free] - low[free]) / (high - low)[free]
        steps = np.eye(len(free)) * np.where(share > 0.5, -0.12, 0.12)[:, None]
        options = {"maxfev": 60, "initial_simplex": np.vstack([share, *(share + steps)])}
        return float(min(values[best], minimize(at, share, method="Nelder-Mead", options=options).fun))

    def members(self, count: int, seed: int) -> list[Member]:
        """Corners of the box and some members from inside."""
        random = np.random.default_rng(seed)
        inside = [tuple(float(random.uniform(*ends)) for ends in self.ranges) for _ in range(count)]
        return [*itertools.product(*self.ranges), *inside]


def _at_origin(coefficients: Any) -> int:
    return int(np.argmax(coefficients[::-1] != 0))
