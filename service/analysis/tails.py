"""The end of a response, when one decaying oscillation is all that is left of it, in closed form.

x(τ) = Re(A·e^(s·τ)), τ ≥ 0, s = −σ + jω with σ, ω > 0. Its turning points are half a period π/ω apart and
shrink by q = e^(−σπ/ω), so every sum over them is geometric.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Tail:
    """One signal's oscillation from `begin` on, about 0; times in the loop's own unit."""

    begin: float
    root: complex
    amplitude: complex

    @property
    def half_period(self) -> float:
        """Time between two turning points."""
        return math.pi / self.root.imag

    @property
    def ratio(self) -> float:
        """By how much each turning value is smaller than the one before."""
        return math.exp(self.root.real * self.half_period)

    @property
    def envelope(self) -> float:
        """The largest abs x could be."""
        return abs(self.amplitude)

    def value(self, after: float) -> float:
        """x at `begin` + `after`."""
        return (self.amplitude * cmath.exp(self.root * after)).real

    def first_turn(self) -> float:
        """Time after `begin` of the first turning point."""
        return self._first_quarter(self.amplitude * self.root)

    def total_variation(self) -> float:
        """Σ of all rises and falls from `begin` on."""
        turn = abs(self.value(self.first_turn()))
        q = self.ratio
        return abs(self.value(self.first_turn()) - self.value(0.0)) + turn * (1 + q) / (1 - q)

    def absolute_integrals(self) -> tuple[float, float, float, float]:
        """(∫ abs x dt, ∫ x² dt, ∫ t·abs x dt, ∫ x dt) from `begin` on, t counted from the step."""
        integral = Tail(0.0, self.root, self.amplitude / self.root)
        absolute = integral.total_variation()
        squared = self.amplitude**2
        square = -abs(squared) / (4 * self.root.real) + 0.5 * (-squared / (2 * self.root)).real
        return absolute, square, self.begin * absolute + self._first_moment(), -integral.amplitude.real

    def last_exit(self, band: float) -> float | None:
        """The last time (from the step) at which abs x is above `band`; None where it never is from `begin`
        on.
        """
        turn_at = self.first_turn()
        turn = abs(self.value(turn_at))
        if turn > band:
            count = math.floor(math.log(turn / band) / -math.log(self.ratio))
            low = turn_at + count * self.half_period
        elif abs(self.value(0.0)) > band:
            low = 0.0
        else:
            return None
        high = turn_at if low == 0.0 else low + self.half_period
        for _ in range(100):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if abs(self.value(middle)) > band else (low, middle)
        return self.begin + 0.5 * (low + high)

    def turns_near(self, band: float, share: float) -> bool:
        """Whether a turning value lies within `share` of the band's edge."""
        turn = abs(self.value(self.first_turn()))
        if not band * (1 - share) <= turn < math.inf:
            return False
        # turning values fall by q; one lies in the strip exactly if the strip, in logarithms, holds a
        # multiple
        step = -math.log(self.ratio)
        first = math.ceil(math.log(turn / (band * (1 + share))) / step)
        last = math.floor(math.log(turn / (band * (1 - share))) / step)
        return last >= max(first, 0)

    def _first_quarter(self, amplitude: complex) -> float:
        """The first τ ≥ 0 at which `amplitude`·e^(jωτ) is imaginary."""
        angle = (math.pi / 2 - cmath.phase(amplitude)) % math.pi
        return angle / self.root.imag

    def _first_moment(self) -> float:
        """∫ τ·abs x dτ from 0 on, half-cycle by half-cycle."""
        zero, half, q = self._first_quarter(self.amplitude), self.half_period, self.ratio
        at_zero = self.amplitude * cmath.exp(self.root * zero)
        area = abs(_moment(at_zero, self.root, half, 0))
        moment = abs(_moment(at_zero, self.root, half, 1))
        before = abs(_moment(self.amplitude, self.root, zero, 1))
        return before + (zero * area + moment) / (1 - q) + half * area * q / (1 - q) ** 2


def _moment(amplitude: complex, root: complex, until: float, power: int) -> float:
    """∫ from 0 of τ^power·Re(amplitude·e^(root·τ)) dτ, power 0 or 1."""
    end = amplitude * cmath.exp(root * until)
    if power == 0:
        return ((end - amplitude) / root).real
    return ((end * (until / root - 1 / root**2)) + amplitude / root**2).real
