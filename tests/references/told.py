"""A plant and a controller as polynomials of fifty digits, read by the interface's definitions.

Polynomials are lists of mpf, highest power first. Nothing is cancelled between controller and plant.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from mpmath import mp, mpc, mpf

DIGITS = 50
mp.dps = DIGITS

Polynomial = list[Any]


@dataclass(frozen=True)
class Terms:
    """Kp + Ki/s + Kd·s/(1+Tf·s), signed."""

    kp: Any
    ki: Any
    kd: Any


@dataclass(frozen=True)
class ExactLoop:
    """L(s) = numerator/denominator·e^(−s·dead_time), and what the responses need beside it.

    `feedback` and `setpoint` are without the direction, which is in `numerator`.
    """

    numerator: Polynomial
    denominator: Polynomial
    dead_time: Any
    plant_numerator: Polynomial
    plant_denominator: Polynomial
    direction: int
    feedback: Terms
    setpoint: Terms
    tf: Any
    measurement_filter: Any
    integrates: bool

    def with_gain(self, factor: Any) -> ExactLoop:
        """The same loop with its plant's gain multiplied."""
        scaled = [mpf(factor) * c for c in self.numerator]
        plant = [mpf(factor) * c for c in self.plant_numerator]
        return ExactLoop(**{**self.__dict__, "numerator": scaled, "plant_numerator": plant})

    def with_more_dead_time(self, extra: Any) -> ExactLoop:
        """The same loop with dead time added."""
        return ExactLoop(**{**self.__dict__, "dead_time": self.dead_time + mpf(extra)})

    def at(self, s: Any) -> Any:
        """L(s) at fifty digits."""
        rational = value_at(self.numerator, s) / value_at(self.denominator, s)
        return rational * mp.exp(-s * self.dead_time)

    def characteristic(self, s: Any) -> Any:
        """denominator + numerator·e^(−s·dead_time): entire, its zeros are the closed loop's roots."""
        delayed = value_at(self.numerator, s) * mp.exp(-s * self.dead_time)
        return value_at(self.denominator, s) + delayed


def exact_loop(plant: Any, controller: Any) -> ExactLoop:
    """The open loop of a plant and a controller, per cent in and per cent out."""
    feedback, setpoint, tf, integrates = controller_terms(controller)
    plant_numerator, plant_denominator = plant_polynomials(plant)
    direction = 1 if controller.action == "reverse" else -1
    filter_time = _number(controller.measurement_filter_s)
    path = controller_numerator(feedback, tf, integrates)
    numerator = multiply([mpf(direction)], path, plant_numerator)
    poles = multiply([tf, mpf(1)], [mpf(1), mpf(0)] if integrates else [mpf(1)])
    denominator = multiply(poles, [filter_time, mpf(1)], plant_denominator)
    return ExactLoop(
        numerator=trimmed(numerator),
        denominator=trimmed(denominator),
        dead_time=mpf(plant.dead_time_s),
        plant_numerator=trimmed(plant_numerator),
        plant_denominator=trimmed(plant_denominator),
        direction=direction,
        feedback=feedback,
        setpoint=setpoint,
        tf=tf,
        measurement_filter=filter_time,
        integrates=integrates,
    )


def controller_numerator(terms: Terms, tf: Any, integrates: bool) -> Polynomial:
    """Numerator over s·(1+Tf·s), or over 1+Tf·s without integral action."""
    square, linear = terms.kd + terms.kp * tf, terms.kp + terms.ki * tf
    return [square, linear, terms.ki] if integrates else [square, linear]


def controller_terms(controller: Any) -> tuple[Terms, Terms, Any, bool]:
    """Feedback terms, set-point terms, Tf, and whether there is a pole at the origin."""
    if controller.form == "two_zeros":
        return _two_zeros(controller)
    weight_p, weight_d = _weights(controller, default_derivative=0)
    if controller.form == "parallel":
        kp, ki, kd = _gain(controller.proportional), _integral_gain(controller), _derivative(controller)
        tf = _filter(controller, kd / kp if kp else mpf(0)) if kd else mpf(0)
        return Terms(kp, ki, kd), Terms(weight_p * kp, ki, weight_d * kd), tf, ki != 0
    ti, td = _integral_time(controller.integral), _derivative(controller)
    tf = _filter(controller, td)
    if controller.form == "ideal":
        kp = _gain(controller.proportional)
        factor = kp if controller.proportional else mpf(1)
        ki = factor / ti if ti else mpf(0)
        feedback, setpoint = Terms(kp, ki, factor * td), Terms(weight_p * kp, ki, weight_d * factor * td)
        return feedback, setpoint, tf, ti is not None
    return _series(_gain(controller.proportional), ti, td, tf, weight_p, weight_d)


def _series(kc: Any, ti: Any, td: Any, tf: Any, b: Any, c: Any) -> tuple[Terms, Terms, Any, bool]:
    """Kc·(b + 1/(Ti·s))·(1 + c·D(s)), D(s) = (Td−Tf)·s/(1+Tf·s), from its powers of s over s·(1+Tf·s)."""

    def path(weight_p: Any, weight_d: Any) -> Terms:
        lead = (weight_d * (td - tf) + tf) if td else mpf(0)
        ki = kc / ti if ti else mpf(0)
        powers = multiply([kc * weight_p, ki], [lead, mpf(1)])
        return _from_powers(powers[2], powers[1], powers[0], tf)

    return path(mpf(1), mpf(1)), path(b, c), tf, ti is not None


def _two_zeros(controller: Any) -> tuple[Terms, Terms, Any, bool]:
    b, c = _weights(controller, default_derivative=1)
    k, tf = mpf(controller.gain), _filter(controller, mpf(0))
    zeros = [_complex(zero) for zero in controller.zeros_rad_s]
    if len(zeros) == 1:
        constant, linear, square = -k * zeros[0].real, k, mpf(0)
    else:
        constant, linear, square = k * (zeros[0] * zeros[1]).real, -k * (zeros[0] + zeros[1]).real, k
    feedback = _from_powers(constant, linear, square, tf)
    return feedback, _from_powers(constant, b * linear, c * square, tf), tf, True


def _from_powers(constant: Any, linear: Any, square: Any, tf: Any) -> Terms:
    """(square·s² + linear·s + constant)/(s·(1+Tf·s)) as terms."""
    kp = linear - constant * tf
    return Terms(kp, constant, square - kp * tf)


def _weights(controller: Any, default_derivative: int) -> tuple[Any, Any]:
    weight = controller.setpoint_weight
    if weight == "unknown":
        return mpf(1), mpf(default_derivative)
    return mpf(weight.proportional), mpf(weight.derivative)


def _number(value: Any) -> Any:
    return mpf(0) if value in (None, "unknown") else mpf(value)


def _gain(term: Any) -> Any:
    if term is None:
        return mpf(0)
    return mpf(term.value) if term.unit == "gain" else 100 / mpf(term.value)


def _integral_time(term: Any) -> Any:
    if term is None or term.value == 0:
        return None
    value = mpf(term.value)
    return {
        "seconds": value,
        "minutes": 60 * value,
        "repeats_per_second": 1 / value,
        "repeats_per_minute": 60 / value,
    }[term.unit]


def _integral_gain(controller: Any) -> Any:
    term = controller.integral
    if term is None or term.value == 0:
        return mpf(0)
    value = mpf(term.value)
    if term.unit == "gain_per_scan":
        return value / mpf(controller.scan.interval_s)
    return {
        "gain_per_second": value,
        "gain_per_minute": value / 60,
        "seconds": 1 / value,
        "minutes": 1 / (60 * value),
    }[term.unit]


def _derivative(controller: Any) -> Any:
    term = controller.derivative
    if term is None:
        return mpf(0)
    if term.unit == "gain_scans":
        return mpf(term.value) * mpf(controller.scan.interval_s)
    return mpf(term.value) * (60 if "minutes" in term.unit else 1)


def _filter(controller: Any, td: Any) -> Any:
    entered = controller.derivative_filter
    if entered in (None, "unknown"):
        return mpf(0)
    if entered.unit == "ratio":
        return td / mpf(entered.value)
    return mpf(entered.value) * (60 if entered.unit == "minutes" else 1)


def plant_polynomials(plant: Any) -> tuple[Polynomial, Polynomial]:
    """Numerator and denominator of a parametric plant kind, dead time apart."""
    match plant.kind:
        case "first_order":
            return [mpf(plant.gain)], [mpf(plant.time_constant_s), mpf(1)]
        case "second_order":
            return _second_order(plant)
        case "integrating":
            return [mpf(plant.gain_per_s)], multiply([mpf(1), mpf(0)], [mpf(plant.lag_s), mpf(1)])
        case "transfer_function":
            return [mpf(c) for c in plant.numerator], [mpf(c) for c in plant.denominator]
        case "zeros_poles_gain":
            zeros, poles = from_roots(plant.zeros_rad_s), from_roots(plant.poles_rad_s)
            return [mpf(plant.gain) * c for c in zeros], poles
    raise ValueError(plant.kind)


def _second_order(plant: Any) -> tuple[Polynomial, Polynomial]:
    numerator = [mpf(plant.gain) * mpf(plant.lead_time_constant_s), mpf(plant.gain)]
    if plant.time_constants_s is not None:
        first, second = (mpf(time) for time in plant.time_constants_s)
        return numerator, multiply([first, mpf(1)], [second, mpf(1)])
    frequency, damping = mpf(plant.natural_frequency_rad_s), mpf(plant.damping_ratio)
    return numerator, [1 / frequency**2, 2 * damping / frequency, mpf(1)]


def from_roots(roots: Any) -> Polynomial:
    """The real polynomial with these roots and leading coefficient 1."""
    product = [mpc(1)]
    for root in roots:
        product = multiply(product, [mpc(1), -_complex(root)])
    return [c.real for c in product]


def value_at(polynomial: Polynomial, s: Any) -> Any:
    """The polynomial's value at `s`."""
    total = mpf(0)
    for coefficient in polynomial:
        total = total * s + coefficient
    return total


def derivative(polynomial: Polynomial) -> Polynomial:
    """The derivative of a polynomial."""
    degree = len(polynomial) - 1
    return [c * (degree - index) for index, c in enumerate(polynomial[:-1])] or [mpf(0)]


def multiply(*polynomials: Polynomial) -> Polynomial:
    """The product of polynomials."""
    total: Polynomial = [mpf(1)]
    for polynomial in polynomials:
        product = [mpf(0)] * (len(total) + len(polynomial) - 1)
        for i, a in enumerate(total):
            for j, b in enumerate(polynomial):
                product[i + j] += a * b
        total = product
    return total


def trimmed(polynomial: Polynomial) -> Polynomial:
    """The polynomial without leading coefficients that are 0; at least one coefficient stays."""
    start = next((index for index, c in enumerate(polynomial) if c != 0), len(polynomial) - 1)
    return polynomial[start:]


def polynomial_roots(polynomial: Polynomial) -> list[Any]:
    """Every root at fifty digits, with multiplicity; roots at the origin exact."""
    return list(_roots(tuple(trimmed(polynomial))))


@lru_cache(maxsize=256)
def _roots(polynomial: tuple[Any, ...]) -> list[Any]:
    at_origin = 0
    while len(polynomial) > 1 and polynomial[-1] == 0:
        polynomial, at_origin = polynomial[:-1], at_origin + 1
    roots = [mpc(0)] * at_origin
    if len(polynomial) > 1:
        roots += _roots_off_origin(list(polynomial))
    return roots


def _roots_off_origin(polynomial: Polynomial) -> list[Any]:
    try:
        with mp.workdps(4 * DIGITS):
            found = mp.polyroots(polynomial[::-1], maxsteps=50, extraprec=400, asc=True)
    except mp.NoConvergence:
        # equal roots: eigenvalues of the companion matrix keep a share of the digits, one in the multiplicity
        with mp.workdps(8 * DIGITS):
            order = len(polynomial) - 1
            companion = mp.matrix(order, order)
            for column in range(order):
                companion[0, column] = -polynomial[column + 1] / polynomial[0]
            for row in range(1, order):
                companion[row, row - 1] = mpf(1)
            found = mp.eig(companion, left=False, right=False)
    return [mpc(root) for root in found]


def _complex(root: Any) -> Any:
    return mpc(*root) if isinstance(root, tuple) else mpc(root)
