"""The box of models: every loop that the stated uncertainty allows, and enclosures of L over pieces of it.

A member of the box has its gain multiplied by k, its plant's rational part turned from P(s) into fⁿ·P(f·s)
and some dead time θ. On the axis, with w = ln(ωf) and v = ln f,
    ln L = ln k + n·v + p(w) + c(w − v) − jωθ,   ω = e^(w−v),
where p is ln P(je^w) and c is what does not depend on the plant: controller, filter, a divided-out filter. So
for one (w, v) gain and dead time sweep a polar sector exactly, and two dimensions are left to search. A
member's factors are the plant's own: nothing is cancelled against the controller.

Over a cell of (w, v) each factor ln(jω − r) is its value and slope at the centre and a remainder by Taylor:
d²/d(ln ω)² ln(jω − r) = −r·jω/(jω − r)², whose magnitude over the cell follows from the least distance to r.
All enclosures are widened by what rounding may do.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.loop import EPSILON, ClosedLoopParts, Complexes, Reals
from service.analysis.plant import FrequencyResponse, PlantModel, Uncertainty, ZerosPolesGain
from service.analysis.rational import rational
from service.analysis.results import BoxMember

ROUNDING_FACTOR = 64.0
"""How many times the rounding of one term an enclosure is widened by."""

CRUDE = 0.3
"""Above this remainder (nepers) the magnitude is enclosed factor by factor as well."""

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


@dataclass(frozen=True, eq=False)
class UncertainLoop:
    """A loop whose plant is uncertain, in the loop's own unit of time.

    `roots` complex, shape (m,), the plant's first; `weights` +1 for zeros, −1 for poles; `of_plant` says
    which move with the time constants. `order` is n: the plant's poles minus zeros at the origin.
    """

    roots: Complexes
    weights: Reals
    of_plant: npt.NDArray[np.bool_]
    log_gain: float
    sign: float
    order: int
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
        return self.order - self.excess_of_plant

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
    def _turned(self) -> tuple[Reals, float]:
        """−1 for factors right of the axis, which are turned about, and the angle of −L that this adds."""
        right = self.roots.real > 0
        angle = math.pi * float(self.weights[right].sum()) + (math.pi if self.sign < 0 else 0.0)
        return np.where(right, -1.0, 1.0), angle + math.pi

    @cached_property
    def _split_weights(self) -> Reals:
        """Weights of the plant's factors and of the others, shape (m, 2)."""
        return np.stack([self.weights * self.of_plant, self.weights * ~self.of_plant], axis=1)

    @cached_property
    def _sizes(self) -> Reals:
        return np.abs(self.roots)

    def at(self, w: Reals, v: Reals) -> tuple[Complexes, Complexes, Complexes]:
        """(ln(−L), its slope by w, its slope by v) for k = 1 and no dead time, shapes of `w`, (q,)."""
        logs, towards, _ = self._factors(w, v)
        return self._combined(logs, towards, v)

    def _factors(self, w: Reals, v: Reals) -> tuple[Complexes, Complexes, Complexes]:
        """(Σ weighted ln(jω − r), jω/(jω − r), jω − r); the last two of shape (q, m)."""
        omega = np.exp(np.where(self.of_plant, w[:, None], (w - v)[:, None]))
        difference = 1j * omega - self.roots
        logs = np.asarray(np.log(difference * self._turned[0]) @ self.weights, complex)
        return logs, 1j * omega / difference, difference

    def _combined(
        self, logs: Complexes, towards: Complexes, v: Reals
    ) -> tuple[Complexes, Complexes, Complexes]:
        slopes = towards @ self._split_weights
        value = logs + (self.log_gain + 1j * self._turned[1]) + self.order * v
        return value, slopes[:, 0] + slopes[:, 1], self.order - slopes[:, 1]

    def cells(self, w: Reals, v: Reals, half_w: Reals, half_v: Reals) -> Cells:
        """Enclosures over the cells w ± half_w, v ± half_v, all shape (q,)."""
        logs, towards, difference = self._factors(w, v)
        value, slope_w, slope_v = self._combined(logs, towards, v)
        half_u = half_w + half_v
        # how fast the slopes of the plant's factors and of the others may change in the cell
        half = np.where(self.of_plant, half_w[:, None], half_u[:, None])
        centre = difference.imag + self.roots.imag
        low, high = centre * np.exp(-half), centre * np.exp(half)
        gap = np.maximum(np.maximum(low - self.roots.imag, self.roots.imag - high), 0.0)
        nearest = gap * gap + self.roots.real**2
        bend = self._sizes * high / np.where(nearest > 0, nearest, 1e-300)
        bend = np.where(self._sizes > 0, bend, 0.0)
        bends = bend @ np.abs(self._split_weights)
        bends = 0.5 * bends
        terms = 8.0 + len(self.roots) + abs(self.log_gain) + np.abs(self.order * v)
        terms = terms + np.abs(towards).sum(1) * (1.0 + np.abs(w) + np.abs(v))
        remainder = bends[:, 0] * half_w * half_w + bends[:, 1] * half_u * half_u
        remainder = remainder + ROUNDING_FACTOR * EPSILON * terms
        crude = self._crude(remainder, low, high, gap, nearest, v, half_v)
        return Cells(self, w, v, half_w, half_v, value, slope_w, slope_v, bends, remainder, *crude)

    def _crude(
        self, remainder: Reals, low: Reals, high: Reals, gap: Reals, nearest: Reals, v: Reals, half_v: Reals
    ) -> tuple[Reals, Reals]:
        """Bounds of ln abs L factor by factor where the remainder is large, else −inf and inf; (q,) each."""
        lowest, highest = np.full(len(remainder), -np.inf), np.full(len(remainder), np.inf)
        chosen = np.flatnonzero(~(remainder <= CRUDE))
        if chosen.size:
            b = self.roots.imag
            farthest = np.maximum(np.abs(low[chosen] - b), np.abs(high[chosen] - b))
            near = 0.5 * np.log(nearest[chosen])
            far = 0.5 * np.log(farthest * farthest + self.roots.real**2)
            above, below = np.where(self.weights > 0, far, -near), np.where(self.weights > 0, near, -far)
            middle = self.log_gain + self.order * v[chosen]
            spread = abs(self.order) * half_v[chosen] + 1e-9
            lowest[chosen] = below.sum(1) + middle - spread
            highest[chosen] = above.sum(1) + middle + spread
        # a pole and a zero on the axis in one cell make nan: nothing is known
        return np.where(lowest == lowest, lowest, -np.inf), np.where(highest == highest, highest, np.inf)


class Corners(NamedTuple):
    """Where cells lie: centres and half widths, all shape (q,)."""

    w: Reals
    v: Reals
    half_w: Reals
    half_v: Reals


@dataclass(frozen=True, eq=False)
class Cells:
    """Cells of (w, v) and Taylor enclosures of ln(−L), k = 1 and no dead time, over each; all shape (q,).

    `bends` (q, 2): half the largest second derivatives of what moves with w and of what moves with w − v.
    """

    loop: UncertainLoop
    w: Reals
    v: Reals
    half_w: Reals
    half_v: Reals
    value: Complexes
    slope_w: Complexes
    slope_v: Complexes
    bends: Reals
    remainder: Reals
    crude_low: Reals
    crude_high: Reals

    def __len__(self) -> int:
        return len(self.w)

    @cached_property
    def omega(self) -> Reals:
        """ω at the centres."""
        return np.exp(self.w - self.v)

    @cached_property
    def omega_remainder(self) -> Reals:
        """How far ω may be from its own tangent in the cell."""
        half = self.half_w + self.half_v
        rounding = ROUNDING_FACTOR * EPSILON * (1.0 + np.abs(self.w) + np.abs(self.v))
        return self.omega * (0.5 * half * half * np.exp(half) + rounding)

    @cached_property
    def omega_lowest(self) -> Reals:
        """A bound below ω in the cell."""
        return self.omega * np.exp(-(self.half_w + self.half_v)) * (1.0 - 1e-12)

    @cached_property
    def omega_highest(self) -> Reals:
        """A bound above ω in the cell."""
        return self.omega * np.exp(self.half_w + self.half_v) * (1.0 + 1e-12)

    @cached_property
    def log_magnitude(self) -> tuple[Reals, Reals]:
        """Bounds of ln abs L for k = 1."""
        spread = np.abs(self.slope_w.real) * self.half_w + np.abs(self.slope_v.real) * self.half_v
        spread = spread + self.remainder
        low = np.maximum(self.value.real - spread, self.crude_low)
        high = np.minimum(self.value.real + spread, self.crude_high)
        return low, high

    def phase(self, dead_time: float) -> tuple[Reals, Reals]:
        """Bounds of the argument of −L with this dead time."""
        spread = np.abs(self.slope_w.imag - self.omega * dead_time) * self.half_w
        spread = spread + np.abs(self.slope_v.imag + self.omega * dead_time) * self.half_v
        spread = spread + self.remainder + dead_time * self.omega_remainder
        middle = self.value.imag - self.omega * dead_time
        return middle - spread, middle + spread

    def curvature(self, dead_time: float) -> tuple[Reals, Reals]:
        """What of the remainder the width in w and that in v are to blame for, with this dead time."""
        of_u = self.bends[:, 1] + 0.5 * self.omega * dead_time
        return (self.bends[:, 0] + of_u) * self.half_w**2, of_u * self.half_v**2

    def combination(
        self, of_log: Reals, of_phase: Reals, of_omega: Reals, constant: Reals | float = 0.0
    ) -> Combination:
        """of_log·ln abs L + of_phase·arg(−L) + of_omega·ω + constant for k = 1, no dead time; (…, q)."""
        value = of_log * self.value.real + of_phase * self.value.imag + of_omega * self.omega + constant
        slope_w = of_log * self.slope_w.real + of_phase * self.slope_w.imag + of_omega * self.omega
        slope_v = of_log * self.slope_v.real + of_phase * self.slope_v.imag - of_omega * self.omega
        size = np.sqrt(of_log * of_log + of_phase * of_phase)
        remainder = size * self.remainder + np.abs(of_omega) * self.omega_remainder
        reach = np.abs(slope_w) * self.half_w + np.abs(slope_v) * self.half_v
        return Combination(value, reach + remainder)

    def only(self, chosen: npt.NDArray[np.intp]) -> Corners:
        """Place and size of some cells."""
        return Corners(self.w[chosen], self.v[chosen], self.half_w[chosen], self.half_v[chosen])


@dataclass(frozen=True, eq=False)
class Combination:
    """A real function over cells: its value at the centres, and how far from it it may be in each."""

    value: Reals
    spread: Reals

    @cached_property
    def lowest(self) -> Reals:
        """A bound below it in each cell."""
        return self.value - self.spread

    @cached_property
    def highest(self) -> Reals:
        """A bound above it in each cell."""
        return self.value + self.spread


def uncertain_loop(
    parts: ClosedLoopParts, plant_model: PlantModel, uncertainty: Uncertainty
) -> UncertainLoop | None:
    """The uncertain loop; None for measured points, of which a fit is no proof."""
    if isinstance(plant_model, FrequencyResponse):
        return None
    own = rational(plant_model)
    unit = parts.unit_rad_s
    # a filter that was divided out is known: its zero stands behind the plant's own and does not move
    moving_zeros, fixed_zeros = np.split(np.array(parts.plant.zeros_rad_s, complex), [len(own.zeros_rad_s)])
    moving_poles = np.array(parts.plant.poles_rad_s, complex)
    of_controller = parts.controller
    filter_poles = [-1.0 / parts.measurement_filter] if parts.measurement_filter > 0 else []
    fixed_zeros = np.concatenate([np.array(of_controller.zeros_rad_s, complex) / unit, fixed_zeros])
    fixed_poles = np.concatenate(
        [np.array(of_controller.poles_rad_s, complex) / unit, np.array(filter_poles, complex)]
    )
    groups = [(moving_zeros, 1.0), (moving_poles, -1.0), (fixed_zeros, 1.0), (fixed_poles, -1.0)]
    entered, half_s = plant_model.dead_time_s, 0.5 * plant_model.identified_at_scan_s
    return UncertainLoop(
        roots=np.concatenate([roots for roots, _ in groups]),
        weights=np.concatenate([np.full(len(roots), weight) for roots, weight in groups]),
        of_plant=np.arange(sum(len(roots) for roots, _ in groups)) < len(moving_zeros) + len(moving_poles),
        log_gain=parts.loop.log_gain,
        sign=parts.loop.sign,
        order=int(np.count_nonzero(moving_poles == 0)) - int(np.count_nonzero(moving_zeros == 0)),
        dead_times=DeadTimes(
            entered=entered * unit,
            reduction=half_s * unit,
            log_factor=_logs(uncertainty.dead_time),
            extra=uncertainty.dead_time_extra_s[1] * unit,
        ),
        log_gain_factor=_logs(uncertainty.gain),
        log_time_factor=_logs(uncertainty.time_constants),
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
