"""What the entered gains mean: every form brought to signed parallel terms and to zeros, poles and gain.

C(s) = Kp + Ki/s + Kd·s/(1+Tf·s) holds any of the four forms exactly when the terms may be negative; so does
the set-point path, with the same Ki and Tf. The zeros are taken from the form as it was entered wherever the
form shows them, since the way over the parallel terms would lose digits.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    FilterTime,
    IdealController,
    IntegralGain,
    IntegralTime,
    ParallelController,
    Proportional,
    Scan,
    SeriesController,
    SetpointWeight,
    TwoZerosController,
    as_complex,
)

SECONDS_PER_MINUTE = 60.0


@dataclass(frozen=True, slots=True)
class ParallelTerms:
    """Kp + Ki/s + Kd·s/(1+Tf·s), signed, in seconds. `tf_s` 0: no filter."""

    kp: float
    ki_per_s: float
    kd_s: float
    tf_s: float


@dataclass(frozen=True, slots=True)
class ControllerTerms:
    """A controller's feedback and set-point path, and the feedback path as zeros and poles in rad/s.

    `gain` is the leading coefficient: C(s) = gain·∏(s−z)/∏(s−p). Direction is not in it.
    `without_derivative`: the feedback path of a signal that the derivative does not see.
    """

    feedback: ParallelTerms
    setpoint: ParallelTerms
    without_derivative: ParallelTerms
    zeros_rad_s: tuple[complex, ...]
    poles_rad_s: tuple[complex, ...]
    gain: float


def controller_gain(proportional: Proportional | None) -> float:
    """The dimensionless gain of an entered gain or band; 0 where the term is absent."""
    if proportional is None:
        return 0.0
    return proportional.value if proportional.unit == "gain" else 100.0 / proportional.value


def integral_time_s(integral: IntegralTime | None) -> float | None:
    """The integral time in seconds; None where there is no integral action."""
    if integral is None or integral.value == 0:
        return None
    match integral.unit:
        case "seconds":
            return integral.value
        case "minutes":
            return integral.value * SECONDS_PER_MINUTE
        case "repeats_per_second":
            return 1.0 / integral.value
        case "repeats_per_minute":
            return SECONDS_PER_MINUTE / integral.value


def integral_gain_per_s(integral: IntegralGain | None, scan: object) -> float:
    """The integral gain of the parallel form; 0 where there is none."""
    if integral is None:
        return 0.0
    match integral.unit:
        case "gain_per_second":
            return integral.value
        case "gain_per_minute":
            return integral.value / SECONDS_PER_MINUTE
        case "seconds":
            return 1.0 / integral.value
        case "minutes":
            return 1.0 / (integral.value * SECONDS_PER_MINUTE)
        case "gain_per_scan":
            return integral.value / _interval_s(scan)


def derivative_s(controller: IdealController | SeriesController | ParallelController) -> float:
    """The derivative time Td, in the parallel form the gain Kd, in seconds; 0 where there is none."""
    term = controller.derivative
    if term is None:
        return 0.0
    if term.unit in ("minutes", "gain_minutes"):
        return term.value * SECONDS_PER_MINUTE
    if term.unit == "gain_scans":
        return term.value * _interval_s(controller.scan)
    return term.value


def filter_time_s(controller: Controller) -> float:
    """The derivative filter's time Tf in seconds; 0 where there is none or it is unknown."""
    entered = controller.derivative_filter
    if not isinstance(entered, DerivativeFilter | FilterTime):
        return 0.0
    if entered.unit == "seconds":
        return entered.value
    if entered.unit == "minutes":
        return entered.value * SECONDS_PER_MINUTE
    if isinstance(controller, TwoZerosController):  # pragma: no cover - FilterTime has no ratio
        raise AssertionError(entered.unit)
    divisor = controller_gain(controller.proportional) if isinstance(controller, ParallelController) else 1.0
    return derivative_s(controller) / divisor / entered.value


def weights(controller: Controller) -> SetpointWeight:
    """The set-point weights; the form's defaults where they are unknown."""
    if isinstance(controller.setpoint_weight, SetpointWeight):
        return controller.setpoint_weight
    return SetpointWeight(derivative=1.0 if isinstance(controller, TwoZerosController) else 0.0)


def controller_terms(controller: Controller) -> ControllerTerms:
    """The signed terms, zeros, poles and gain of an entered controller, in the controller's own gain
    basis.
    """
    match controller:
        case IdealController():
            return _ideal(controller)
        case SeriesController():
            return _series(controller)
        case ParallelController():
            return _parallel(controller)
        case TwoZerosController():
            return _two_zeros(controller)


def quadratic_roots(a: float, b: float, c: float) -> tuple[complex, ...]:
    """Roots of a·s² + b·s + c, real coefficients; as many as the degree. Free of cancellation."""
    if a == 0:
        return () if b == 0 else (complex(0.0 - c / b),)
    half, product = -0.5 * b / a, c / a
    discriminant = half * half - product
    if discriminant < 0:
        spread = math.sqrt(-discriminant)
        return (complex(half, spread), complex(half, -spread))
    larger = half + math.copysign(math.sqrt(discriminant), half)
    return (complex(larger), complex(product / larger if larger != 0 else 0.0))


def _ideal(controller: IdealController) -> ControllerTerms:
    weight = weights(controller)
    gain = 1.0 if controller.proportional is None else controller_gain(controller.proportional)
    kp = controller_gain(controller.proportional)
    time_s = integral_time_s(controller.integral)
    ki = 0.0 if time_s is None else gain / time_s
    kd, tf = gain * derivative_s(controller), filter_time_s(controller)
    feedback = ParallelTerms(kp, ki, kd, tf)
    setpoint = ParallelTerms(weight.proportional * kp, ki, weight.derivative * kd, tf)
    return _with_zeros(feedback, setpoint)


def _parallel(controller: ParallelController) -> ControllerTerms:
    weight = weights(controller)
    kp, kd = controller_gain(controller.proportional), derivative_s(controller)
    ki = integral_gain_per_s(controller.integral, controller.scan)
    tf = filter_time_s(controller) if kd > 0 else 0.0
    feedback = ParallelTerms(kp, ki, kd, tf)
    setpoint = ParallelTerms(weight.proportional * kp, ki, weight.derivative * kd, tf)
    return _with_zeros(feedback, setpoint)


def _series(controller: SeriesController) -> ControllerTerms:
    weight = weights(controller)
    gain = controller_gain(controller.proportional)
    time_s = integral_time_s(controller.integral)
    td, tf = derivative_s(controller), filter_time_s(controller)
    feedback = _series_terms(gain, time_s, td, tf, 1.0)
    # x = (1 + c·D)·SP with D = (Td−Tf)·s/(1+Tf·s) is the same lead-lag with Td moved towards Tf
    setpoint = _series_terms(gain, time_s, tf + weight.derivative * (td - tf), tf, weight.proportional)
    zeros = [complex(-1.0 / time)] if (time := time_s) else []
    if td > 0:
        zeros.append(complex(-1.0 / td))
    poles = _poles(time_s is not None, tf)
    leading = gain * (td or 1.0) / (tf or 1.0)
    without = _series_terms(gain, time_s, tf, tf, 1.0)
    return ControllerTerms(feedback, setpoint, without, tuple(zeros), poles, leading)


def _series_terms(gain: float, time_s: float | None, td: float, tf: float, b: float) -> ParallelTerms:
    """Kc·(b + 1/(Ti·s))·(1+Td·s)/(1+Tf·s) in parallel terms."""
    ki = 0.0 if time_s is None else gain / time_s
    # comparing powers of s over s·(1+Tf·s); Td − Tf is formed first, since it may be small
    kp = gain * b + ki * (td - tf)
    kd = (td - tf) * (gain * b - ki * tf)
    return ParallelTerms(kp, ki, kd, tf)


def _two_zeros(controller: TwoZerosController) -> ControllerTerms:
    weight, k, tf = weights(controller), controller.gain, filter_time_s(controller)
    zeros = tuple(as_complex(zero) for zero in controller.zeros_rad_s)
    if len(zeros) == 1:
        ki, linear, square = -k * zeros[0].real, k, 0.0
    else:
        ki, linear, square = k * (zeros[0] * zeros[1]).real, -k * (zeros[0] + zeros[1]).real, k
    feedback = _over_common_denominator(ki, linear, square, tf)
    setpoint = _over_common_denominator(ki, weight.proportional * linear, weight.derivative * square, tf)
    without = _over_common_denominator(ki, linear, 0.0, tf)
    return ControllerTerms(feedback, setpoint, without, zeros, _poles(True, tf), k / (tf or 1.0))


def _over_common_denominator(ki: float, linear: float, square: float, tf: float) -> ParallelTerms:
    """(square·s² + linear·s + ki)/(s·(1+Tf·s)) in parallel terms."""
    kp = linear - ki * tf
    return ParallelTerms(kp, ki, square - kp * tf, tf)


def _with_zeros(feedback: ParallelTerms, setpoint: ParallelTerms) -> ControllerTerms:
    square = feedback.kp * feedback.tf_s + feedback.kd_s
    linear = feedback.kp + feedback.ki_per_s * feedback.tf_s
    integrates = feedback.ki_per_s > 0
    zeros = (
        quadratic_roots(square, linear, feedback.ki_per_s)
        if integrates
        else quadratic_roots(0.0, square, feedback.kp)
    )
    leading = next((value for value in (square, linear, feedback.ki_per_s) if value != 0), 0.0)
    if leading == 0:
        # a controller without terms is refused where it is entered: here one has fallen below float64
        raise OverflowError("the controller's terms are too small for float64")
    without = ParallelTerms(feedback.kp, feedback.ki_per_s, 0.0, feedback.tf_s)
    return ControllerTerms(
        feedback,
        setpoint,
        without,
        zeros,
        _poles(integrates, feedback.tf_s),
        leading / (feedback.tf_s or 1.0),
    )


def _poles(integrates: bool, tf_s: float) -> tuple[complex, ...]:
    origin = (0j,) if integrates else ()
    return (*origin, complex(-1.0 / tf_s)) if tf_s > 0 else origin


def _interval_s(scan: object) -> float:
    if not isinstance(scan, Scan):  # the dataclass has refused it before
        raise TypeError("a gain for each scan needs the scan interval")
    return scan.interval_s
