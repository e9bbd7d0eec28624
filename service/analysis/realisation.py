"""The loop as a state space, every state that it has: plant sections in a row, filter, controller.

    ẋ = A·x + b_w·w + b_r·SP,   u = c_u·x + d_u·w + d_r·SP,   PV = c_y·x + d_y·w,   w(t) = u(t − θ) + load(t −
    θ)

The plant is a cascade of first and second-order sections with real coefficients, so that no polynomial is
multiplied out. Hidden factors keep their states.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.analysis.loop import ClosedLoopParts, Reals
from service.analysis.rational import Rational


@dataclass(frozen=True, eq=False)
class StateSpace:
    """The loop cut at the plant's input; shapes (n, n) and (n,).

    `setpoint_impulse` is the weight of the impulse that an unfiltered derivative of a stepped set point puts
    into u at t = 0.
    """

    a: Reals
    b_w: Reals
    b_r: Reals
    c_u: Reals
    d_u: float
    d_r: float
    c_y: Reals
    d_y: float
    setpoint_impulse: float

    @property
    def order(self) -> int:
        """Number of states."""
        return len(self.a)

    def closed_without_dead_time(self) -> tuple[Reals, float]:
        """(A, k): the closed loop's matrix where θ = 0, and k = 1/(1 − d_u)."""
        k = 1.0 / (1.0 - self.d_u)
        return self.a + k * np.outer(self.b_w, self.c_u), k


def realise(parts: ClosedLoopParts) -> StateSpace | None:
    """The state space of a loop in its own unit of time; None where the controller's derivative has no filter
    and
    the plant passes a step at once, since then no response exists."""
    ap, bp, cp, dp = plant_state_space(parts.plant)
    terms, setpoint = parts.feedback, parts.setpoint
    unfiltered = terms.tf_s == 0 and terms.kd_s != 0
    if unfiltered and dp != 0 and parts.measurement_filter == 0:
        return None
    n = len(ap)
    filtered, integrates = parts.measurement_filter > 0, terms.ki_per_s != 0
    derivative = terms.tf_s > 0
    order = n + filtered + integrates + derivative
    a, b_w, b_r = np.zeros((order, order)), np.zeros(order), np.zeros(order)
    a[:n, :n], b_w[:n] = ap, bp
    c_y = np.zeros(order)
    c_y[:n] = cp
    measured, measured_w, rate, rate_w = c_y.copy(), dp, np.zeros(order), 0.0
    if filtered:
        a[n] = c_y / parts.measurement_filter
        a[n, n] -= 1.0 / parts.measurement_filter
        b_w[n] = dp / parts.measurement_filter
        measured, measured_w = np.zeros(order), 0.0
        measured[n] = 1.0
    c_u, d_u, d_r = -terms.kp * measured, -terms.kp * measured_w, setpoint.kp
    if integrates:
        row = n + filtered
        a[row], b_w[row], b_r[row] = (
            -terms.ki_per_s * measured,
            -terms.ki_per_s * measured_w,
            setpoint.ki_per_s,
        )
        c_u[row] += 1.0
    if derivative:
        row = order - 1
        through, through_w = -terms.kd_s / terms.tf_s * measured, -terms.kd_s / terms.tf_s * measured_w
        through_r = setpoint.kd_s / terms.tf_s
        a[row], b_w[row], b_r[row] = through / terms.tf_s, through_w / terms.tf_s, through_r / terms.tf_s
        a[row, row] -= 1.0 / terms.tf_s
        c_u, d_u, d_r = c_u + through, d_u + through_w, d_r + through_r
        c_u[row] -= 1.0
    elif unfiltered:
        rate, rate_w = (a[n], b_w[n]) if filtered else (c_y @ a, float(c_y @ b_w))
        c_u, d_u = c_u - terms.kd_s * rate, d_u - terms.kd_s * rate_w
    sign = parts.direction
    impulse = sign * setpoint.kd_s if not derivative else 0.0
    return StateSpace(a, b_w, b_r, sign * c_u, sign * d_u, sign * d_r, c_y, dp, impulse)


def plant_state_space(plant: Rational) -> tuple[Reals, Reals, Reals, float]:
    """Real sections in a row: (A, b, c, d)."""
    a, b, c, d = np.zeros((0, 0)), np.zeros(0), np.zeros(0), 1.0
    for section_a, section_b, section_c, section_d in _sections(plant):
        size, more = len(a), len(section_a)
        joined = np.zeros((size + more, size + more))
        joined[:size, :size], joined[size:, size:] = a, section_a
        joined[size:, :size] = np.outer(section_b, c)
        a, b = joined, np.concatenate([b, section_b * d])
        c, d = np.concatenate([section_d * c, section_c]), section_d * d
    return a, b, plant.gain * c, plant.gain * d


Section = tuple[Reals, Reals, Reals, float]


def _sections(plant: Rational) -> list[Section]:
    """Each pair of poles with a pair of zeros where one is left, each pole with a zero where one is left."""
    zero_pairs = [zero for zero in plant.zeros_rad_s if zero.imag > 0]
    real_zeros = [zero.real for zero in plant.zeros_rad_s if zero.imag == 0]
    pole_pairs = [pole for pole in plant.poles_rad_s if pole.imag > 0]
    real_poles = sorted((pole.real for pole in plant.poles_rad_s if pole.imag == 0), key=abs)
    # a real pair of poles takes the zero pairs that are left over; there are no more zeros than poles
    couples: list[tuple[complex, complex]] = [(pole, pole.conjugate()) for pole in pole_pairs]
    for _ in range(max(0, len(zero_pairs) - len(pole_pairs))):
        couples.append((complex(real_poles.pop()), complex(real_poles.pop())))
    sections = [_first_order(pole, _nearest(real_zeros, pole)) for pole in real_poles]
    for first, second in couples:
        if zero_pairs:
            zero = zero_pairs.pop()
            numerator = [1.0, -2 * zero.real, abs(zero) ** 2]
        else:
            taken = [
                zero
                for zero in (_nearest(real_zeros, abs(first)), _nearest(real_zeros, abs(first)))
                if zero is not None
            ]
            numerator = list(np.poly(taken)) if taken else [1.0]
        sections.append(_second_order(first, second, [0.0] * (3 - len(numerator)) + numerator))
    return sections


def _nearest(zeros: list[float], pole: float) -> float | None:
    if not zeros:
        return None
    zero = min(zeros, key=lambda candidate: abs(abs(candidate) - abs(pole)))
    zeros.remove(zero)
    return zero


def _first_order(pole: float, zero: float | None) -> Section:
    scale = abs(pole) or 1.0
    if zero is None:
        return np.array([[pole]]), np.array([scale]), np.array([1.0 / scale]), 0.0
    return np.array([[pole]]), np.array([scale]), np.array([(pole - zero) / scale]), 1.0


def _second_order(first: complex, second: complex, numerator: list[float]) -> Section:
    """(n2·s² + n1·s + n0)/((s − first)(s − second)), states 1/(s − …) and 1/((s − …)(s − …)) or a rotating
    pair.
    """
    n2, n1, n0 = numerator
    if first.imag == 0:
        p, q = first.real, second.real
        g1 = n1 + n2 * (p + q)
        g0 = n0 - n2 * p * q + g1 * q
        return np.array([[p, 0.0], [1.0, q]]), np.array([1.0, 0.0]), np.array([g1, g0]), n2
    re, im = first.real, first.imag
    g1 = n1 + 2 * n2 * re
    g0 = (n0 - n2 * abs(first) ** 2 + g1 * re) / im
    return np.array([[re, -im], [im, re]]), np.array([1.0, 0.0]), np.array([g1, g0]), n2
