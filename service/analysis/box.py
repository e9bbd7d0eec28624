"""The box of models: every loop that the stated uncertainty allows.

A member of the box has its gain multiplied by k, its plant's rational part turned from P(s) into fⁿ·P(f·s)
and some dead time θ. On the axis, with w = ln(ωf) and v = ln f,
    ln L = ln k + n·v + p(w) + c(w − v) − jωθ,   ω = e^(w−v),
where p is ln P(je^w) and c is what does not depend on the plant: controller, filter, a divided-out filter. So
for one (w, v) gain and dead time sweep a polar sector exactly, and two dimensions are left to search. A
member's factors are the plant's own: nothing is cancelled against the controller.

`box_cells` encloses L over pieces of the (w, v) plane.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.loop import ClosedLoopParts, Complexes, Reals
from service.analysis.plant import FrequencyResponse, PlantModel, Uncertainty, ZerosPolesGain
from service.analysis.rational import rational
from service.analysis.results import BoxMember

TURN = 2.0 * math.pi


@dataclass(frozen=True, slots=True)
class DeadTimes:
    """The dead time of a member: entered·factor + extra − reduction, not below 0; in the loop's own unit."""

    entered: float
    reduction: float
    log_factor: tuple[float, float]
    extra: float

    @property
    def nominal(self) -> float:
        """The dead time of the loop as entered."""
        return max(0.0, self.entered - self.reduction)

    @property
    def uncertain(self) -> bool:
        """Members differ in their dead time."""
        return self.extra > 0 or (self.entered > 0 and self.log_factor != (0.0, 0.0))

    def range(self, scale: float = 1.0) -> tuple[float, float]:
        """Lowest and highest, with every factor raised to `scale` and the extra multiplied by it."""
        low, high = (self.entered * math.exp(scale * log) for log in self.log_factor)
        return max(0.0, low - self.reduction), max(0.0, high + scale * self.extra - self.reduction)

    def scale_above(self, more: Reals) -> Reals:
        """Least scale with a dead time of `more` ≥ 0 above nominal, shape of `more`; inf: none."""
        # the reduction can use up the entered dead time and more; then some of the growth is lost
        more = np.where(more > 0, more + max(0.0, self.reduction - self.entered), 0.0)
        by_extra = more / self.extra if self.extra > 0 else np.where(more > 0, np.inf, 0.0)
        log = self.log_factor[1]
        if not (self.entered > 0 and log > 0):
            return by_extra
        scale = np.minimum(by_extra, np.log1p(more / self.entered) / log)
        if self.extra == 0:
            return scale
        # Newton on a convex function from above comes down to the root and never passes it
        for _ in range(6):
            grown = np.exp(np.minimum(scale * log, 700.0))
            value = self.entered * (grown - 1.0) + scale * self.extra - more
            scale = scale - value / (self.entered * log * grown + self.extra)
        return scale * (1.0 - 1e-12)

    def scale_below(self, less: Reals) -> Reals:
        """Least scale with a dead time of `less` ≥ 0 below nominal, shape of `less`; inf: none."""
        log = self.log_factor[0]
        if not (self.entered > 0 and log < 0):
            return np.where(less > 0, np.inf, 0.0)
        # a dead time of 0 is only approached
        share = np.where(less < self.nominal, less, self.entered) / self.entered
        return np.where(less > 0, np.log1p(-share) / log, 0.0)


@dataclass(frozen=True, slots=True)
class Bounds:
    """One box: ranges of ln k, of v = ln f and of the dead time in the loop's own unit."""

    log_gain: tuple[float, float]
    log_time: tuple[float, float]
    dead_time: tuple[float, float]


class Response(NamedTuple):
    """ln(−L) = x + jy for k = 1 and no dead time, and its slopes by w and v; (q,) each."""

    x: Reals
    y: Reals
    x_w: Reals
    y_w: Reals
    x_v: Reals
    y_v: Reals


class Factors(NamedTuple):
    """Factors jω − r, ω being e^w for the plant's and e^(w−v) for the others: ω, ω − Im r, abs(jω − r)²; (q,
    m).
    """

    omega: Reals
    above: Reals
    square: Reals


@dataclass(frozen=True, eq=False)
class UncertainLoop:
    """A loop whose plant is uncertain, in the loop's own unit of time.

    `roots` complex, shape (m,), the plant's first; `weights` +1 for zeros, −1 for poles; `of_plant` says
    which move with the time constants: those away from the origin.
    """

    roots: Complexes
    weights: Reals
    of_plant: npt.NDArray[np.bool_]
    log_gain: float
    sign: float
    dead_times: DeadTimes
    log_gain_factor: tuple[float, float]
    log_time_factor: tuple[float, float]

    def bounds(self, scale: float = 1.0) -> Bounds:
        """The box with every factor raised to `scale`."""
        low_k, high_k = self.log_gain_factor
        low_f, high_f = self.log_time_factor
        return Bounds(
            (scale * low_k, scale * high_k), (scale * low_f, scale * high_f), self.dead_times.range(scale)
        )

    @property
    def conditions(self) -> bool:
        """Gain or dead time are certain, so that L(jω) = −1 is a condition on (w, v)."""
        return self.log_gain_factor == (0.0, 0.0) or not self.dead_times.uncertain

    @cached_property
    def excess(self) -> int:
        """Poles minus zeros of the loop."""
        return -round(float(self.weights.sum()))

    @cached_property
    def excess_of_plant(self) -> int:
        """Poles minus zeros that move with the time constants."""
        return -round(float(self.weights[self.of_plant].sum()))

    @cached_property
    def growth_at_infinity(self) -> int:
        """e in: the leading coefficient of a member's L is that of the nominal one times f^e."""
        return -self.excess_of_plant

    @cached_property
    def order_at_origin(self) -> int:
        """Poles minus zeros of the loop at the origin."""
        return -round(float(self.weights[self.roots == 0].sum()))

    @cached_property
    def log_origin_coefficient(self) -> float:
        """ln abs c in L(s) → k·c·s^(−order_at_origin) as s → 0; the same for every f."""
        away = self.roots != 0
        return self.log_gain + float(np.log(np.abs(self.roots[away])) @ self.weights[away])

    @cached_property
    def origin_sign(self) -> float:
        """The sign of c."""
        turned = int(np.count_nonzero((self.roots.imag == 0) & (self.roots.real > 0)))
        return -self.sign if turned % 2 else self.sign

    @cached_property
    def split_weights(self) -> Reals:
        """Weights of the plant's factors and of the others, shape (m, 2)."""
        return np.array([self.weights * self.of_plant, self.weights * ~self.of_plant]).T

    @cached_property
    def sizes(self) -> Reals:
        """abs r."""
        return np.abs(self.roots)

    @cached_property
    def real_squared(self) -> Reals:
        """(Re r)²."""
        return self.roots.real**2

    @cached_property
    def _turned(self) -> tuple[Reals, Reals, float]:
        """−1 for factors right of the axis, which are turned about, their distance to it, and the angle of −L
        that the turns add.
        """
        right = self.roots.real > 0
        angle = math.pi * float(self.weights[right].sum()) + (math.pi if self.sign < 0 else 0.0)
        return np.where(right, -1.0, 1.0), np.abs(self.roots.real), angle + math.pi

    def at(self, w: Reals, v: Reals) -> Response:
        """The response at points, shapes of `w`, (q,)."""
        return self.combined(self.factors(w, v))

    def factors(self, w: Reals, v: Reals) -> Factors:
        """The factors at points, shape (q, m)."""
        omega = np.exp(np.where(self.of_plant, w[:, None], (w - v)[:, None]))
        above = omega - self.roots.imag
        return Factors(omega, above, above * above + self.real_squared)

    def combined(self, factors: Factors) -> Response:
        """What the factors make together."""
        omega, above, square = factors
        turned, to_axis, angle = self._turned
        logs, angles = np.log(square), np.arctan2(turned * above, to_axis)
        # jω/(jω − r) is the slope of ln(jω − r) by ln ω
        by_omega = omega / square
        x_slopes = (by_omega * above) @ self.split_weights
        y_slopes = -(by_omega * self.roots.real) @ self.split_weights
        return Response(
            x=0.5 * (logs @ self.weights) + self.log_gain,
            y=angles @ self.weights + angle,
            x_w=x_slopes[:, 0] + x_slopes[:, 1],
            y_w=y_slopes[:, 0] + y_slopes[:, 1],
            x_v=-x_slopes[:, 1],
            y_v=-y_slopes[:, 1],
        )


def uncertain_loop(
    parts: ClosedLoopParts, plant_model: PlantModel, uncertainty: Uncertainty
) -> UncertainLoop | None:
    """The uncertain loop; None for measured points, of which a fit is no proof."""
    if isinstance(plant_model, FrequencyResponse):
        return None
    unit = parts.unit_rad_s
    # a filter that was divided out is known: its zero stands behind the plant's own and does not move
    own = len(parts.plant.zeros_rad_s) - (plant_model.identified_through_filter_s > 0)
    moving_zeros, fixed_zeros = np.split(np.array(parts.plant.zeros_rad_s, complex), [own])
    moving_poles = np.array(parts.plant.poles_rad_s, complex)
    of_controller = parts.controller
    filter_poles = [-1.0 / parts.measurement_filter] if parts.measurement_filter > 0 else []
    fixed_zeros = np.concatenate([np.array(of_controller.zeros_rad_s, complex) / unit, fixed_zeros])
    fixed_poles = np.concatenate(
        [np.array(of_controller.poles_rad_s, complex) / unit, np.array(filter_poles, complex)]
    )
    groups = [(moving_zeros, 1.0), (moving_poles, -1.0), (fixed_zeros, 1.0), (fixed_poles, -1.0)]
    entered, half_s = plant_model.dead_time_s, 0.5 * plant_model.identified_at_scan_s
    roots = np.concatenate([roots for roots, _ in groups])
    moves = (np.arange(len(roots)) < len(moving_zeros) + len(moving_poles)) & (roots != 0)
    return UncertainLoop(
        roots=roots,
        weights=np.concatenate([np.full(len(roots), weight) for roots, weight in groups]),
        of_plant=moves,
        log_gain=parts.loop.log_gain,
        sign=parts.loop.sign,
        dead_times=DeadTimes(
            entered=entered * unit,
            reduction=half_s * unit,
            log_factor=_logs(uncertainty.dead_time),
            extra=uncertainty.dead_time_extra_s[1] * unit,
        ),
        log_gain_factor=_logs(uncertainty.gain),
        log_time_factor=_logs(uncertainty.time_constants) if moves.any() else (0.0, 0.0),
    )


def member_of(plant_model: PlantModel, member: BoxMember) -> ZerosPolesGain:
    """One member of the box as a plant of its own, without uncertainty.

    The factors fall on what was entered: corrections that are known (a filter divided out, half a scan of the
    identification) stay as they are.
    """
    plant, f = rational(plant_model), member.time_constants
    zeros, poles = plant.zeros_rad_s, plant.poles_rad_s
    order = sum(pole == 0 for pole in poles) - sum(zero == 0 for zero in zeros)
    return ZerosPolesGain(
        kind="zeros_poles_gain",
        zeros_rad_s=tuple(_told(zero / f) for zero in zeros),
        poles_rad_s=tuple(_told(pole / f) for pole in poles),
        gain=member.gain * plant.gain * f ** (order + len(zeros) - len(poles)),
        dead_time_s=plant_model.dead_time_s * member.dead_time + member.dead_time_extra_s,
        gain_basis=plant_model.gain_basis,
        identified_through_filter_s=plant_model.identified_through_filter_s,
        identified_at_scan_s=plant_model.identified_at_scan_s,
    )


def _told(root: complex) -> float | tuple[float, float]:
    return root.real if root.imag == 0 else (root.real, root.imag)


def _logs(factor: tuple[float, float]) -> tuple[float, float]:
    return math.log(factor[0]), math.log(factor[1])
