"""How measurement noise reaches the controller output, in continuous time."""

from __future__ import annotations

import math
from functools import cached_property

import numpy as np

from service.analysis.loop import Complexes, Factors, OpenLoop, Reals
from service.analysis.peaks import Numbers, Peak, Responses, Sensitivity
from service.analysis.results import Noise, Quantity

NUMERATOR_ALLOWANCE = 1.2
"""abs C·F has no sharper features than a quarter of its distance to the nearest zero or pole."""


class ControlSensitivity(Sensitivity):
    """C·F/(1+L), from measurement noise to the controller output; F the measurement filter."""

    def __init__(self, loop: OpenLoop, controller: Factors) -> None:
        super().__init__(loop)
        self._zeros, self._poles, self._log_gain = controller.zeros, controller.poles, controller.log_gain
        self._roots = np.concatenate([controller.zeros, controller.poles])
        self._weights = np.repeat([1.0, -1.0], [len(controller.zeros), len(controller.poles)])
        self._one_by_one = list(zip(self._roots.tolist(), self._weights.tolist(), strict=True))

    def numerator(self, omega: Reals, response: Complexes) -> Complexes | float:
        """abs C·F; its angle plays no part."""
        return np.exp(self._log_magnitude(omega)).astype(complex)

    def growth(self, omega: Numbers, response: Responses, slope: Responses) -> Numbers:
        """The sign of d abs(C·F/(1+L))/dω."""
        distance = 1.0 + response
        near = (distance * distance.conjugate()).real
        return self._log_slope(omega) * near - (slope * response * distance.conjugate()).real

    def bound(self, magnitude: Reals, left: Reals, right: Reals) -> Reals:
        """Largest abs C·F/abs(1 − abs L) of the step; with an allowance where abs C·F has a maximum in it."""
        ends = np.array([left, right])
        largest: Reals = np.exp(self._log_magnitude(ends).max(axis=0))
        slopes = np.asarray(self._log_slope(ends))
        turns = (slopes[0] > 0) & (slopes[1] < 0)
        return np.where(turns, NUMERATOR_ALLOWANCE, 1.0) * largest / np.abs(1.0 - magnitude)

    def ends(self) -> list[float]:
        """abs C·F/(1+L) at ω = 0 and the values it tends to as ω grows; inf where it has no bound."""
        return self._ends

    @cached_property
    def _ends(self) -> list[float]:
        return [self._at_origin(), *self._at_infinity()]

    def high_frequency(self) -> float:
        """lim abs C·F; inf where it grows."""
        excess = len(self._poles) - len(self._zeros)
        return 0.0 if excess > 0 else (math.exp(self._log_gain) if excess == 0 else math.inf)

    def _log_slope(self, omega: Numbers) -> Numbers:
        """d ln abs C·F/dω, shape of `omega`."""
        if isinstance(omega, float):
            s = 1j * omega
            return math.fsum(-weight * (1.0 / (s - root)).imag for root, weight in self._one_by_one)
        return np.asarray(-(1.0 / (1j * omega[..., None] - self._roots)).imag @ self._weights)

    def _log_magnitude(self, omega: Reals) -> Reals:
        """ln abs C·F, shape of `omega`."""
        return np.asarray(
            np.log(np.abs(1j * omega[..., None] - self._roots)) @ self._weights + self._log_gain
        )

    def _at_origin(self) -> float:
        """With integral action 1/abs P(0); without it abs C(0)/abs(1 + L(0))."""
        order = int(np.count_nonzero(self._poles == 0)) - int(np.count_nonzero(self._zeros == 0))
        loop = self.loop
        nonzero = [np.log(np.abs(roots[roots != 0])).sum() for roots in (self._zeros, self._poles)]
        coefficient = math.exp(self._log_gain + float(nonzero[0]) - float(nonzero[1]))
        # A ~ a·s^(−order), 1 + L ~ c·s^(−order of L) or 1 + L(0)
        loop_order = max(loop.order_at_origin, 0)
        if order > loop_order:
            return math.inf
        if order < loop_order:
            return 0.0
        return coefficient / abs((1.0 if loop.order_at_origin <= 0 else 0.0) + self._loop_at_origin())

    def _loop_at_origin(self) -> float:
        return self.loop.origin_coefficient if self.loop.order_at_origin >= 0 else 0.0

    def _at_infinity(self) -> list[float]:
        high, loop = self.high_frequency(), self.loop
        if loop.excess > 0 or loop.sign == 0:
            return [high]
        if loop.excess < 0:
            # both grow: C·F/L = 1/P(∞)
            return [math.exp(self._log_gain - loop.log_gain) if math.isinf(high) else 0.0]
        last = loop.value_at_infinity
        turned = [last] if loop.dead_time == 0 else [abs(last), -abs(last)]
        return [high / abs(1.0 + value) for value in turned]


def noise(control: ControlSensitivity, peak: Peak | None) -> Noise:
    """The figures of noise that follow from the axis alone; the loop is stable.

    `peak`: the supremum of `control`, None where it was not found.
    """
    high = control.high_frequency()
    worst: Quantity = None if peak is None else peak.value
    if any(math.isinf(value) for value in control.ends()):
        worst = "unbounded"
    return Noise(
        output_gain_high_frequency="unbounded" if math.isinf(high) else high,
        max_control_sensitivity=worst,
    )
