"""What a plant kind means as zeros, poles and gain: P(s) = gain·∏(s−z)/∏(s−p), dead time apart."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.analysis.controller import as_complex
from service.analysis.plant import (
    FirstOrder,
    FrequencyResponse,
    Integrating,
    PlantModel,
    SecondOrder,
    StateSpace,
    TransferFunction,
    ZerosPolesGain,
)
from service.analysis.realised_plant import zeros_poles_gain
from service.analysis.response_fit import fitted
from service.analysis.terms import quadratic_roots


@dataclass(frozen=True, slots=True)
class Rational:
    """Zeros and poles in rad/s, conjugates adjacent, and the leading gain."""

    zeros_rad_s: tuple[complex, ...]
    poles_rad_s: tuple[complex, ...]
    gain: float


def rational(plant: PlantModel) -> Rational:
    """The rational part of a plant; of measured points a rational fit, which is no more evidence than they
    are.

    Raises FieldError where zeros and poles cannot be found.
    """
    match plant:
        case FirstOrder():
            return Rational((), (complex(-1.0 / plant.time_constant_s),), plant.gain / plant.time_constant_s)
        case SecondOrder():
            return _second_order(plant)
        case Integrating():
            if plant.lag_s == 0:
                return Rational((), (0j,), plant.gain_per_s)
            return Rational((), (0j, complex(-1.0 / plant.lag_s)), plant.gain_per_s / plant.lag_s)
        case TransferFunction():
            numerator, denominator = _trimmed(plant.numerator), _trimmed(plant.denominator)
            return Rational(
                polynomial_roots(numerator), polynomial_roots(denominator), numerator[0] / denominator[0]
            )
        case ZerosPolesGain():
            return Rational(
                tuple(as_complex(zero) for zero in plant.zeros_rad_s),
                tuple(as_complex(pole) for pole in plant.poles_rad_s),
                plant.gain,
            )
        case StateSpace():
            return Rational(*zeros_poles_gain(plant))
        case FrequencyResponse():
            return Rational(*fitted(plant))


def polynomial_roots(coefficients: tuple[float, ...]) -> tuple[complex, ...]:
    """Roots of a polynomial, highest power first, leading coefficient not 0; roots at the origin exact.

    Eigenvalues of the companion matrix after the variable has been scaled so that the first and the last
    coefficient have one magnitude; otherwise slow units push small coefficients below the rounding of large
    ones.
    """
    at_origin = 0
    while coefficients[-1] == 0:
        coefficients, at_origin = coefficients[:-1], at_origin + 1
    degree = len(coefficients) - 1
    origin = (0j,) * at_origin
    if degree == 0:
        return origin
    if degree == 1:
        return (*origin, complex(-coefficients[1] / coefficients[0]))
    if degree == 2:
        return (*origin, *quadratic_roots(*coefficients))
    log_scale = (math.log(abs(coefficients[-1])) - math.log(abs(coefficients[0]))) / degree
    logs = [math.log(abs(c)) - k * log_scale if c else -math.inf for k, c in enumerate(coefficients)]
    scaled = [math.copysign(math.exp(log - logs[0]), c) for log, c in zip(logs, coefficients, strict=True)]
    roots = np.roots(np.array(scaled)) * math.exp(log_scale)
    return (*origin, *(complex(root) for root in roots))


def _second_order(plant: SecondOrder) -> Rational:
    if plant.time_constants_s is not None:
        first, second = plant.time_constants_s
        poles: tuple[complex, ...] = (complex(-1.0 / first), complex(-1.0 / second))
        gain = plant.gain / first / second
    else:
        # the dataclass has checked that both are there
        frequency, damping = plant.natural_frequency_rad_s or 0.0, plant.damping_ratio or 0.0
        poles = _resonant_poles(frequency, damping)
        gain = plant.gain * frequency * frequency
    if plant.lead_time_constant_s == 0:
        return Rational((), poles, gain)
    return Rational((complex(-1.0 / plant.lead_time_constant_s),), poles, gain * plant.lead_time_constant_s)


def _resonant_poles(frequency_rad_s: float, damping_ratio: float) -> tuple[complex, ...]:
    # (1−ζ)(1+ζ) keeps the digits that 1−ζ² loses near ζ = 1
    inside = (1.0 - damping_ratio) * (1.0 + damping_ratio)
    if inside > 0:
        pole = complex(-damping_ratio, math.sqrt(inside)) * frequency_rad_s
        return (pole, pole.conjugate())
    larger = damping_ratio + math.copysign(math.sqrt(-inside), damping_ratio)
    return (complex(-larger * frequency_rad_s), complex(-frequency_rad_s / larger))


def _trimmed(coefficients: tuple[float, ...]) -> tuple[float, ...]:
    leading = next(index for index, value in enumerate(coefficients) if value != 0)
    return coefficients[leading:]
