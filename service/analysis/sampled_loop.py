"""The open loop as it is executed, told in w = (z−1)/(z+1), where the unit circle is an axis.

On the circle z = e^(jωh) w is j·tan(ωh/2): L there is a rational function of w with an axis of its own, and
everything that is known of a continuous loop's axis (crossovers, encirclements, margins, peaks) holds for it
as it stands, the Nyquist frequency being its infinity. Whole scans of dead time are the all-pass
((1−w)/(1+w))^k.

Poles and the controller's zeros go over by formulas; the sampled plant's zeros are eigenvalues. The factored
loop is compared with the plant's state equations before it is used.

Source: K. J. Åström, B. Wittenmark, Computer-Controlled Systems (3rd ed. 1997), sections 2.6 and 3.2 (zeros
of sampled plants, the bilinear transformation). From memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.analysis.loop import Complexes, Factors, OpenLoop, Reals, without_hidden
from service.analysis.scan import SampledPlant, Scanned
from service.analysis.transmission_zeros import log_product, response, transmission_zeros

BEYOND = 1e-13
"""A pole as near to w = 1 as this, z some 1e13, has lost its digits."""

MET = 1e-8
"""How well the factored loop must meet the plant's state equations, relatively, wherever abs L is not
small.
"""

SMALL = 1e-3
"""Below this abs L the loop is met to `MET` of this; rounding in the state equations allows no more."""

StateMatrices = tuple[Reals, Reals, Reals, float]


POINTS = 16
"""At so many points the factored plant is compared with its state equations."""


class NotFactoredError(ArithmeticError):
    """The sampled plant's zeros are not met to the digits that a verdict needs."""


@dataclass(frozen=True, eq=False)
class SampledLoop:
    """The loop at its scans: L without hidden factors, those, the controller with its filter, and the
    plant.
    """

    scanned: Scanned
    plant: SampledPlant
    loop: OpenLoop
    hidden_roots: Complexes
    controller: Factors

    def rad_s(self, omega: Reals) -> Reals:
        """The frequency in rad/s of a point jω on the axis of w, shape of `omega`; the Nyquist frequency for
        inf.
        """
        return np.asarray(np.arctan(omega) * (2.0 / self.scanned.interval * self.scanned.parts.unit_rad_s))


def form_sampled_loop(scanned: Scanned, extra_delay: float = 0.0) -> SampledLoop:
    """The loop at its scans, the plant's delay lengthened by `extra_delay` in the loop's unit.

    Raises NotFactoredError where float64 does not give the zeros, OverflowError where numbers leave it.
    """
    plant = scanned.sample(extra_delay)
    controller = warped_controller(scanned)
    factors = _plant_factors(scanned, plant, controller)
    zeros = np.concatenate([controller.zeros, factors.zeros])
    poles = np.concatenate([controller.poles, factors.poles])
    if not (np.isfinite(zeros).all() and np.isfinite(poles).all()):
        raise OverflowError("the sampled loop leaves the range of float64")
    free_zeros, free_poles, hidden = without_hidden(zeros, poles)
    direction = scanned.parts.direction
    loop = OpenLoop(
        zeros=free_zeros,
        poles=free_poles,
        log_gain=controller.log_gain + factors.log_gain,
        sign=direction * controller.sign * factors.sign,
        dead_time=0.0,
        all_pass=plant.whole_scans,
    )
    return SampledLoop(scanned, plant, loop, hidden, controller)


def warped_controller(scanned: Scanned) -> Factors:
    """Controller and measurement filter, substituted."""
    controller, h = scanned.parts.filtered_controller, scanned.interval
    zeros, poles = controller.zeros, controller.poles
    excess = len(poles) - len(zeros)
    if scanned.trapezoidal:
        # s = (2/h)·w: every factor keeps its form
        log_gain = controller.log_gain - excess * math.log(2.0 / h)
        return Factors(zeros * (h / 2), poles * (h / 2), log_gain)
    # s = (2/h)·w/(1+w): a factor s − a is ((2 − a·h)/h)·(w − a·h/(2 − a·h))/(1 + w)
    logs = controller.log_gain
    sign = 1.0
    warped = []
    for roots, weight in ((zeros, 1.0), (poles, -1.0)):
        denominator = 2.0 - roots * h
        logs += weight * float(np.log(np.abs(denominator) / h).sum())
        sign *= -1.0 if np.count_nonzero((denominator.imag == 0) & (denominator.real < 0)) % 2 else 1.0
        warped.append(roots * h / denominator)
    more = np.full(abs(excess), -1.0 + 0j)
    if excess > 0:
        warped[0] = np.concatenate([warped[0], more])
    elif excess < 0:
        warped[1] = np.concatenate([warped[1], more])
    return Factors(warped[0], warped[1], logs, sign)


def _plant_factors(scanned: Scanned, plant: SampledPlant, controller: Factors) -> Factors:
    """The plant over a scan but for its whole scans of dead time."""
    poles = np.tanh(np.array(scanned.parts.plant.poles_rad_s, complex) * (0.5 * scanned.interval))
    if (np.abs(1.0 - poles) < BEYOND).any():
        raise OverflowError("an unstable pole of the sampled plant is not told from infinity")
    if plant.held_scans > plant.whole_scans:
        poles = np.append(poles, -1.0)
    if scanned.parts.plant.gain == 0:
        return Factors(np.empty(0, complex), poles, -math.inf, 0.0)
    space = _bilinear(plant)
    for zeros in transmission_zeros(*space):
        gain = _gain(space, zeros, poles, controller)
        if gain is not None:
            return Factors(zeros, poles, math.log(abs(gain)), math.copysign(1.0, gain))
    raise NotFactoredError("the sampled plant's zeros cannot be computed to enough digits")


def _gain(space: StateMatrices, zeros: Complexes, poles: Complexes, controller: Factors) -> float | None:
    """The plant's gain with these zeros; None where they do not meet its state equations."""
    points = _points(poles, zeros)
    direct = response(*space, points)
    ratio = direct / np.exp(log_product(points, zeros, poles))
    through = np.abs(np.exp(log_product(points, controller.zeros, controller.poles) + controller.log_gain))
    size = np.abs(direct) * through
    told = size >= min(SMALL, float(np.sort(size)[-3]))
    ratios = np.sort(ratio.real[told])
    if not ratios.size:
        return None
    gain = float(ratios[len(ratios) // 2])
    error = np.abs(ratio - gain) * size / abs(gain)
    return gain if gain != 0 and np.all(error <= MET * np.maximum(size, SMALL)) else None


def _bilinear(plant: SampledPlant) -> StateMatrices:
    """The plant over a scan as a state space in w, the last output a state of its own where it acts."""
    n = len(plant.phi_less_one)
    more = plant.held_scans - plant.whole_scans
    less_one, b, c = np.zeros((n + more, n + more)), np.zeros(n + more), np.zeros(n + more)
    less_one[:n, :n], b[:n], c[:n] = plant.phi_less_one, plant.gamma0, plant.c
    if more:
        less_one[:n, n], less_one[n, n], b[n], c[n] = plant.gamma1, -1.0, 1.0, plant.d
    inverse = np.linalg.inv(less_one + 2.0 * np.eye(n + more))
    to_output = c @ inverse
    return inverse @ less_one, 2.0 * inverse @ b, to_output, -float(to_output @ b)


def _points(poles: Complexes, zeros: Complexes) -> Complexes:
    """Where the factored plant is compared: points of the axis about every pole and zero."""
    places = np.abs(np.concatenate([poles, zeros]))
    places = places[(places > 0) & (places < 1e8)]
    low, high = (float(places.min()), float(places.max())) if places.size else (1.0, 1.0)
    low, high = 0.1 * low, 10.0 * max(high, 1.0)
    return np.asarray(1j * low * np.exp(np.arange(POINTS) * (math.log(high / low) / (POINTS - 1))))
