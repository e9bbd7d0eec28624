"""The open loop: controller and plant made one, factored, in a natural unit of time.

L(s) = direction·C(s)·F(s)·P(s)·e^(−sθ), F the measurement filter. Everything inside `analysis` works in the
loop's own unit of time, 1/`unit_rad_s`; whoever hands a result out multiplies it back. No factor is
multiplied out.
A zero and a pole of the loop that are one number are kept apart as hidden roots: they are roots of the closed
loop wherever they lie, whatever L(jω) looks like.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass, replace
from functools import cached_property
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.controller import Controller
from service.analysis.errors import FieldError
from service.analysis.plant import PlantModel, Ranges
from service.analysis.rational import Rational, rational
from service.analysis.terms import ControllerTerms, ParallelTerms, controller_terms

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

EPSILON = float(np.finfo(np.float64).eps)

CANCELLED = 8 * EPSILON
"""A zero and a pole nearer to each other than this, relatively, are one number in float64."""


class LoopAt(NamedTuple):
    """L(s), d ln L/ds and d ln D/ds at points s, (m,) each; D is the product of all poles' factors."""

    value: Complexes
    log_slope: Complexes
    log_slope_of_denominator: Complexes


@dataclass(frozen=True, eq=False)
class OpenLoop:
    """L(s) = sign·e^log_gain·∏(s−z)/∏(s−p)·((1−s)/(1+s))^all_pass·e^(−s·dead_time), without the hidden
    factors.

    `zeros` and `poles`: complex, shapes (nz,) and (np,), closed under conjugation. The all-pass is what whole
    scans of dead time are to a sampled loop, told in w = (z−1)/(z+1); a continuous loop has none.
    """

    zeros: Complexes
    poles: Complexes
    log_gain: float
    sign: float
    dead_time: float
    all_pass: int = 0

    @cached_property
    def excess(self) -> int:
        """Poles minus zeros."""
        return len(self.poles) - len(self.zeros)

    @cached_property
    def high_frequency_magnitude(self) -> float:
        """abs L(∞) of the rational part; inf where it grows."""
        if self.excess > 0 or self.sign == 0:
            return 0.0
        return math.exp(min(self.log_gain, 700.0)) if self.excess == 0 else math.inf

    @cached_property
    def value_at_infinity(self) -> float:
        """The real L(∞) of a loop without dead time; inf where it grows."""
        if self.excess > 0 or self.sign == 0:
            return 0.0
        turned = -self.sign if self.all_pass % 2 else self.sign
        return turned * self.high_frequency_magnitude

    @cached_property
    def order_at_origin(self) -> int:
        """Poles minus zeros at s = 0; negative where zeros prevail."""
        return int(self.poles.tolist().count(0) - self.zeros.tolist().count(0))

    @cached_property
    def log_origin_coefficient(self) -> float:
        """ln abs c in L(s) → c·s^(−order_at_origin) as s → 0."""
        weighted = ((abs(root), weight) for root, weight, _ in self._factors_one_by_one)
        return self.log_gain + sum(weight * math.log(size) for size, weight in weighted if size > 0.0)

    @cached_property
    def origin_coefficient(self) -> float:
        """The real c in L(s) → c·s^(−order_at_origin) as s → 0."""
        # a factor (0 − r) is negative for a real r right of the axis; conjugate pairs are positive on either
        # side
        negative = _negative_real_factors(self.zeros) + _negative_real_factors(self.poles)
        return self.sign * (-1.0 if negative % 2 else 1.0) * math.exp(min(self.log_origin_coefficient, 700.0))

    def shifted(self, by: float) -> OpenLoop:
        """The loop as a function of s − `by`: its axis is the line Re s = `by` of this loop."""
        return replace(
            self, zeros=self.zeros - by, poles=self.poles - by, log_gain=self.log_gain - by * self.dead_time
        )

    def with_gain_factor(self, factor: float) -> OpenLoop:
        """The loop with its gain multiplied by `factor` (any sign)."""
        return replace(
            self, log_gain=self.log_gain + math.log(abs(factor)), sign=self.sign * math.copysign(1, factor)
        )

    @cached_property
    def _factors(self) -> tuple[Complexes, Reals, Reals, complex]:
        """All zeros and poles, +1 or -1 for each, -1 where its factor is turned about, and what that adds.

        Left of the axis the principal argument of jω − r runs from -90° to 90°; right of it the factor is
        turned about, so that its argument runs from 270° to 90° without a jump.
        """
        roots = np.concatenate([self.zeros, self.poles])
        weights = np.concatenate([np.ones(len(self.zeros)), -np.ones(len(self.poles))])
        right = roots.real > 0
        angle = math.pi * float(weights[right].sum()) + (math.pi if self.sign < 0 else 0.0)
        return roots, weights, np.where(right, -1.0, 1.0), complex(self.log_gain, angle)

    def on_axis(self, omega: Reals) -> tuple[Complexes, Complexes]:
        """(ln L(jω), its derivative by ω) at ω > 0, shapes of `omega`.

        The phase is continuous in ω but for poles and zeros on the axis.
        """
        roots, weights, turned, constant = self._factors
        difference = 1j * omega[..., None] - roots
        logs = np.log(difference * turned) @ weights + (constant - 1j * self.dead_time * omega)
        slopes = 1j * ((1.0 / difference) @ weights - self.dead_time)
        if self.all_pass:
            logs = logs - 2j * self.all_pass * np.arctan(omega)
            slopes = slopes - 2j * self.all_pass / (1.0 + omega * omega)
        return logs, slopes

    @cached_property
    def _factors_one_by_one(self) -> list[tuple[complex, float, float]]:
        """(root, weight, turned) of `_factors` as plain numbers."""
        roots, weights, turned, _ = self._factors
        return list(zip(roots.tolist(), weights.tolist(), turned.tolist(), strict=True))

    def at_frequency(self, omega: float) -> tuple[complex, complex]:
        """`on_axis` at one frequency, in plain numbers, which is ten times as fast as an array of one.

        Upon a zero or pole, as there: ln abs L is infinite and the derivative is not a number.
        """
        log, slope, s = self._factors[3] - 1j * self.dead_time * omega, complex(-self.dead_time), 1j * omega
        for root, weight, turned in self._factors_one_by_one:
            difference = s - root
            if difference == 0:
                log, slope = log - weight * math.inf, complex(math.nan, math.nan)
                continue
            log += weight * cmath.log(turned * difference)
            slope += weight / difference
        if self.all_pass:
            log -= 2j * self.all_pass * math.atan(omega)
            slope -= 2.0 * self.all_pass / (1.0 + omega * omega)
        return log, 1j * slope

    def log_magnitude_at(self, omega: float) -> tuple[float, float]:
        """(ln abs L(jω), its derivative by ω) at one frequency: the real parts of `at_frequency`, which dead
        time does not touch.
        """
        log, slope = 0.0, 0.0
        for root, weight, _ in self._factors_one_by_one:
            above = omega - root.imag
            square = above * above + root.real * root.real
            if square == 0.0:
                return -weight * math.inf, math.nan
            log += weight * math.log(square)
            slope += weight * above / square
        return self.log_gain + 0.5 * log, slope

    def phase_at(self, omega: float) -> tuple[float, float]:
        """arg L(jω) and its derivative by ω at one frequency: the imaginary parts of `at_frequency`."""
        constant = self._factors[3].imag
        phase, slope = constant - self.dead_time * omega, -self.dead_time
        for root, weight, turned in self._factors_one_by_one:
            above = omega - root.imag
            square = above * above + root.real * root.real
            if square == 0.0:
                return math.nan, math.nan
            phase += weight * math.atan2(turned * above, -turned * root.real)
            slope -= weight * root.real / square
        if self.all_pass:
            phase -= 2.0 * self.all_pass * math.atan(omega)
            slope -= 2.0 * self.all_pass / (1.0 + omega * omega)
        return phase, slope

    def log_response(self, omega: Reals) -> Complexes:
        """ln L(jω) alone."""
        roots, weights, turned, constant = self._factors
        logs = np.log((1j * omega[..., None] - roots) * turned) @ weights
        logs = logs + (constant - 1j * self.dead_time * omega)
        return np.asarray(logs - 2j * self.all_pass * np.arctan(omega) if self.all_pass else logs)

    @cached_property
    def _weights_of_slopes(self) -> Reals:
        """Weights of 1/(s − r) in d ln L/ds and in d ln D/ds, (m, 2)."""
        _, weights, _, _ = self._factors
        return np.array([weights, np.where(weights < 0, 1.0, 0.0)]).T

    def at(self, s: Complexes) -> LoopAt:
        """L and the slopes of its parts at `s`, (m,) each; huge values overflow to inf."""
        roots, weights, _, _ = self._factors
        difference = s[:, None] - roots
        logs = np.log(difference) @ weights + (self.log_gain - s * self.dead_time)
        slopes = (1.0 / difference) @ self._weights_of_slopes
        slope, of_denominator = slopes[:, 0] - self.dead_time, slopes[:, 1]
        if self.all_pass:
            logs = logs + self.all_pass * (np.log(1.0 - s) - np.log(1.0 + s))
            slope = slope - 2.0 * self.all_pass / (1.0 - s * s)
            of_denominator = of_denominator + self.all_pass / (1.0 + s)
        return LoopAt(np.asarray(self.sign * np.exp(logs)), slope, of_denominator)


@dataclass(frozen=True, eq=False)
class Factors:
    """sign·e^log_gain·∏(s−z)/∏(s−p); zeros and poles complex, (nz,) and (np,)."""

    zeros: Complexes
    poles: Complexes
    log_gain: float
    sign: float = 1.0


@dataclass(frozen=True, eq=False)
class ClosedLoopParts:
    """What responses and routes need beside L, in the loop's own unit of time.

    `plant` and `setpoint`/`feedback` terms are separate; `hidden_roots` complex, shape (nh,).
    `filtered_controller`: controller and measurement filter, direction not in it.
    """

    unit_rad_s: float
    loop: OpenLoop
    hidden_roots: Complexes
    plant: Rational
    dead_time: float
    direction: float
    controller: ControllerTerms
    filtered_controller: Factors
    feedback: ParallelTerms
    setpoint: ParallelTerms
    without_derivative: ParallelTerms
    measurement_filter: float
    dead_time_reduced_by_s: float
    dead_time_negative_by_s: float

    @property
    def dead_time_s(self) -> float:
        """Dead time as analysed, in seconds."""
        return self.dead_time / self.unit_rad_s

    def in_rad_s(self, omega: Reals) -> Reals:
        """Frequencies of the loop's own unit in rad/s, shape of `omega`."""
        return np.asarray(omega * self.unit_rad_s)


def form_loop(plant_model: PlantModel, controller: Controller, ranges: Ranges | None) -> ClosedLoopParts:
    """Bring a plant and a controller together.

    Raises FieldError (path from the request's top) where engineering units have no ranges, where dividing out
    the identification filter leaves an improper plant, and where magnitudes leave float64.
    """
    try:
        return _form_loop(plant_model, controller, ranges)
    except (OverflowError, ZeroDivisionError, np.linalg.LinAlgError) as error:
        raise FieldError((), "the loop's numbers are too large or too small to be computed with") from error


def _form_loop(plant_model: PlantModel, controller: Controller, ranges: Ranges | None) -> ClosedLoopParts:
    plant = _in_percent(plant_model, ranges)
    dead_time_s, reduced_s, negative_s = _dead_time(plant_model)
    terms = controller_terms(controller)
    basis = _controller_basis(controller, ranges)
    filter_s = 0.0 if controller.measurement_filter_s == "unknown" else controller.measurement_filter_s
    controller_poles = terms.poles_rad_s + ((complex(-1.0 / filter_s),) if filter_s > 0 else ())
    zeros = np.array(terms.zeros_rad_s + plant.zeros_rad_s, dtype=complex)
    poles = np.array(controller_poles + plant.poles_rad_s, dtype=complex)
    if not (np.isfinite(zeros).all() and np.isfinite(poles).all()):
        raise OverflowError
    unit = _natural_unit(zeros, poles, dead_time_s)
    if not math.isfinite(dead_time_s * unit):
        raise OverflowError
    direction = 1.0 if controller.action == "reverse" else -1.0
    of_controller = (basis, terms.gain, 1.0 / filter_s if filter_s > 0 else 1.0)
    if 0.0 in of_controller:
        raise OverflowError
    controller_log_gain = math.fsum(math.log(factor) for factor in of_controller)
    controller_log_gain += (len(terms.zeros_rad_s) - len(controller_poles)) * math.log(unit)
    log_gain, sign = _log_of_product((direction, *of_controller, plant.gain))
    log_gain += (len(zeros) - len(poles)) * math.log(unit)
    if not math.isfinite(log_gain) and sign != 0:
        raise OverflowError
    free_zeros, free_poles, hidden = without_hidden(
        np.asarray(zeros / unit, complex), np.asarray(poles / unit, complex)
    )
    loop = OpenLoop(free_zeros, free_poles, log_gain if sign else -math.inf, sign, dead_time_s * unit)
    return ClosedLoopParts(
        unit_rad_s=unit,
        loop=loop,
        hidden_roots=hidden,
        plant=_scaled_rational(plant, unit),
        dead_time=dead_time_s * unit,
        direction=direction,
        controller=terms,
        filtered_controller=Factors(
            np.array(terms.zeros_rad_s, complex) / complex(unit),
            np.array(controller_poles, complex) / complex(unit),
            controller_log_gain,
        ),
        feedback=_scaled_terms(terms.feedback, basis, unit),
        setpoint=_scaled_terms(terms.setpoint, basis, unit),
        without_derivative=_scaled_terms(terms.without_derivative, basis, unit),
        measurement_filter=filter_s * unit,
        dead_time_reduced_by_s=reduced_s,
        dead_time_negative_by_s=negative_s,
    )


def _negative_real_factors(roots: Complexes) -> int:
    return int(np.count_nonzero((roots.imag == 0) & (roots.real > 0)))


def _in_percent(plant_model: PlantModel, ranges: Ranges | None) -> Rational:
    try:
        plant = rational(plant_model)
    except FieldError as error:
        raise FieldError(("plant_model", *error.path), error.detail) from error
    if plant_model.identified_through_filter_s > 0:
        zero = complex(-1.0 / plant_model.identified_through_filter_s)
        plant = Rational((*plant.zeros_rad_s, zero), plant.poles_rad_s, plant.gain / -zero.real)
        if len(plant.zeros_rad_s) > len(plant.poles_rad_s):
            raise FieldError(
                ("plant_model", "identified_through_filter_s"),
                "with its filter divided out the plant would have more zeros than poles",
            )
    if plant_model.gain_basis == "percent_of_range":
        return plant
    if ranges is None:
        raise FieldError(("plant_model", "gain_basis"), "engineering units need the loop's ranges")
    return Rational(plant.zeros_rad_s, plant.poles_rad_s, plant.gain * ranges.output.span / ranges.pv.span)


def _controller_basis(controller: Controller, ranges: Ranges | None) -> float:
    if controller.gain_basis == "percent_of_range":
        return 1.0
    if ranges is None:
        raise FieldError(("controller", "gain_basis"), "engineering units need the loop's ranges")
    return ranges.pv.span / ranges.output.span


def _dead_time(plant_model: PlantModel) -> tuple[float, float, float]:
    """Dead time as analysed, how much was taken off for the scan of the identification, how much could not
    be.
    """
    half_s = 0.5 * plant_model.identified_at_scan_s
    reduced_s = min(half_s, plant_model.dead_time_s)
    return plant_model.dead_time_s - reduced_s, reduced_s, half_s - reduced_s


def _natural_unit(zeros: Complexes, poles: Complexes, dead_time_s: float) -> float:
    """A frequency in rad/s about which the loop's dynamics lie: the geometric mean of what it is made of."""
    magnitudes = np.abs(np.concatenate([zeros, poles]))
    logs = [math.log(magnitude) for magnitude in magnitudes if magnitude > 0]
    if dead_time_s > 0:
        logs.append(-math.log(dead_time_s))
    return math.exp(math.fsum(logs) / len(logs)) if logs else 1.0


def _log_of_product(factors: tuple[float, ...]) -> tuple[float, float]:
    if any(factor == 0 for factor in factors):
        return 0.0, 0.0
    sign = math.prod(math.copysign(1.0, factor) for factor in factors)
    return math.fsum(math.log(abs(factor)) for factor in factors), sign


def without_hidden(zeros: Complexes, poles: Complexes) -> tuple[Complexes, Complexes, Complexes]:
    """(zeros, poles, hidden): a zero and a pole that are one number stand in the last alone."""
    free_zeros, free_poles, hidden = [], poles.tolist(), []
    for zero in zeros.tolist():
        distances = [abs(zero - pole) for pole in free_poles]
        nearest = min(distances, default=math.inf)
        if nearest <= CANCELLED * abs(zero):
            hidden.append(free_poles.pop(distances.index(nearest)))
        else:
            free_zeros.append(zero)
    return np.array(free_zeros, complex), np.array(free_poles, complex), np.array(hidden, complex)


def _scaled_rational(plant: Rational, unit: float) -> Rational:
    zeros = tuple(zero / unit for zero in plant.zeros_rad_s)
    poles = tuple(pole / unit for pole in plant.poles_rad_s)
    return Rational(zeros, poles, plant.gain * unit ** (len(zeros) - len(poles)))


def _scaled_terms(terms: ParallelTerms, basis: float, unit: float) -> ParallelTerms:
    return ParallelTerms(
        terms.kp * basis, terms.ki_per_s * basis / unit, terms.kd_s * basis * unit, terms.tf_s * unit
    )
