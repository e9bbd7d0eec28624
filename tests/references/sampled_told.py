"""A loop as it is executed, as polynomials in z at ninety digits, from the told loop and its scan.

The controller is substituted as a whole, s → (z−1)/(h·z) or (2/h)·(z−1)/(z+1); the plant is held over each
scan and its dead time divides one: matrix exponentials of its companion form. PV is read before the new
output is put out. Nothing is cancelled.

Roots are found by Aberth's method from float64 starts, and counted by Schur and Cohn's recursion, which finds
none.

Sources, from memory: K. J. Åström, B. Wittenmark, Computer-Controlled Systems (3rd ed. 1997), section 2.3;
P. Henrici, Applied and Computational Complex Analysis I (1974), section 6.8 (Schur and Cohn).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from mpmath import mp, mpc, mpf

from tests.references.told import ExactLoop, Polynomial, controller_numerator, multiply, trimmed, value_at

DIGITS = 90
MOST_ROOTS_TOGETHER = 40
OUTERMOST = 24


class OnTheCircleError(ValueError):
    """The recursion meets a root on the circle, or a pair that mirrors in it."""


@dataclass(frozen=True)
class SampledPlant:
    """x⁺ = Φ·x + Γ0·w[n−k] + Γ1·w[n−k−1], PV = c·x + d·w[n−k−1]; lists of mpf. `a`, `b` as they were."""

    a: list[list[Any]]
    b: list[Any]
    c: list[Any]
    d: Any
    phi: list[list[Any]]
    gamma0: list[Any]
    gamma1: list[Any]
    whole: int
    fraction: Any


@dataclass(frozen=True)
class ExactSampledLoop:
    """The told loop with its scan. `delay`: of the plant and of the output together, in seconds."""

    told: ExactLoop
    interval: Any
    trapezoidal: bool
    delay: Any

    def controller(self) -> tuple[Polynomial, Polynomial]:
        """Controller, measurement filter and direction in z."""
        told = self.told
        with mp.workdps(DIGITS):
            path = controller_numerator(told.feedback, told.tf, told.integrates)
            poles = multiply([told.tf, mpf(1)], [mpf(1), mpf(0)] if told.integrates else [mpf(1)])
            up, down = self.substituted(trimmed(path), trimmed(poles))
            lag_up, lag_down = self.substituted([mpf(1)], trimmed([told.measurement_filter, mpf(1)]))
            return multiply([mpf(told.direction)], up, lag_up), multiply(down, lag_down)

    def substituted(self, numerator: Polynomial, denominator: Polynomial) -> tuple[Polynomial, Polynomial]:
        """A ratio of polynomials in s as one in z."""
        degree = max(len(numerator), len(denominator)) - 1
        h = self.interval
        over = [h / 2, h / 2] if self.trapezoidal else [h, mpf(0)]

        def one(polynomial: Polynomial) -> Polynomial:
            total = [mpf(0)] * (degree + 1)
            for power, coefficient in enumerate(reversed(polynomial)):
                factors = [[mpf(1), mpf(-1)]] * power + [over] * (degree - power)
                for index, value in enumerate(multiply(*factors)):
                    total[index] += coefficient * value
            return total

        return one(numerator), one(denominator)

    def plant(self, extra: Any = 0) -> SampledPlant:
        """The plant over one scan, its delay lengthened."""
        with mp.workdps(DIGITS):
            return _sampled_plant(self, mpf(extra))

    def plant_ratio(self, extra: Any = 0) -> tuple[Polynomial, Polynomial, int]:
        """(numerator, denominator, k) of the plant: numerator/(denominator·z^k)."""
        with mp.workdps(DIGITS):
            return _ratio(self.plant(extra))

    def characteristic(self, extra: Any = 0) -> Polynomial:
        """The closed loop's polynomial in z, every root of it."""
        with mp.workdps(DIGITS):
            up, down = self.controller()
            plant_up, plant_down, whole = self.plant_ratio(extra)
            forward, back = multiply(up, plant_up), multiply(down, plant_down) + [mpf(0)] * whole
            size = max(len(forward), len(back))
            forward = [mpf(0)] * (size - len(forward)) + forward
            back = [mpf(0)] * (size - len(back)) + back
            return trimmed([one + other for one, other in zip(forward, back, strict=True)])


def sampled_loop(told: ExactLoop, scan: Any) -> ExactSampledLoop:
    """The told loop as its scan executes it."""
    return ExactSampledLoop(
        told=told,
        interval=mpf(scan.interval_s),
        trapezoidal=scan.method == "trapezoidal",
        delay=told.dead_time + mpf(scan.output_delay_s),
    )


def _sampled_plant(loop: ExactSampledLoop, extra: Any) -> SampledPlant:
    a, b, c, d = companion(loop.told.plant_numerator, loop.told.plant_denominator)
    scans = (loop.delay + extra) / loop.interval
    whole = int(mp.floor(scans))
    # what was told in float64 means a whole number of scans where it is one but for rounding
    if scans - whole > 1 - mpf("1e-13") * max(scans, 1):
        whole += 1
    fraction = max(scans - whole, mpf(0))
    if fraction < mpf("1e-13") * max(scans, 1):
        fraction = mpf(0)
    n = len(a)
    augmented = [[*a[row], b[row]] for row in range(n)] + [[mpf(0)] * (n + 1)]
    second = exponential(augmented, (1 - fraction) * loop.interval)
    first = exponential(augmented, fraction * loop.interval) if fraction else _identity(n + 1)
    phi = [row[:n] for row in matmul(second, first)[:n]]
    held_before = [first[row][n] for row in range(n)]
    gamma1 = [sum((second[row][k] * held_before[k] for k in range(n)), mpf(0)) for row in range(n)]
    return SampledPlant(a, b, c, d, phi, [second[row][n] for row in range(n)], gamma1, whole, fraction)


def companion(numerator: Polynomial, denominator: Polynomial) -> tuple[Any, Any, Any, Any]:
    """The controllable form, its states scaled to the plant's own pace."""
    numerator, denominator = trimmed(numerator), trimmed(denominator)
    n = len(denominator) - 1
    monic = [value / denominator[0] for value in denominator]
    padded = [mpf(0)] * (n + 1 - len(numerator)) + [value / denominator[0] for value in numerator]
    d = padded[0]
    pace = max((abs(value) ** (mpf(1) / index) for index, value in enumerate(monic) if index), default=mpf(1))
    pace = pace or mpf(1)
    # in units of the pace: s = pace·σ
    a = [[mpf(0)] * n for _ in range(n)]
    for row in range(n - 1):
        a[row][row + 1] = pace
    for column in range(n):
        a[n - 1][column] = -monic[n - column] / pace ** (n - column) * pace
    b = [mpf(0)] * n
    if n:
        b[n - 1] = pace
    c = [(padded[n - i] - d * monic[n - i]) / pace ** (n - i) for i in range(n)]
    return a, b, c, d


def exponential(matrix: Any, time: Any) -> Any:
    """e^(matrix·time) by Taylor's series on a part of the time, squared."""
    norm = max(sum(abs(value) for value in row) for row in matrix) * time
    squarings = max(0, int(mp.ceil(mp.log(norm, 2))) + 4) if norm > 0 else 0
    with mp.workdps(DIGITS + 20 + squarings):
        scaled = [[value * time / mpf(2) ** squarings for value in row] for row in matrix]
        total = term = _identity(len(matrix))
        for order in range(1, 400):
            term = [[value / order for value in row] for row in matmul(term, scaled)]
            total = [[x + y for x, y in zip(*rows, strict=True)] for rows in zip(total, term, strict=True)]
            if max(abs(value) for row in term for value in row) < mpf(10) ** -(DIGITS + 15 + squarings):
                break
        for _ in range(squarings):
            total = matmul(total, total)
    return total


def _ratio(plant: SampledPlant) -> tuple[Polynomial, Polynomial, int]:
    """By Faddeev and Leverrier: (z − Φ)⁻¹ = Σ z^(n−1−i)·M_i over the characteristic polynomial."""
    n = len(plant.phi)
    denominator, left = [mpf(1)], plant.c  # the row c·M_i
    full = _identity(n)
    now, before = [], []
    for index in range(n):
        now.append(_dot(left, plant.gamma0))
        before.append(_dot(left, plant.gamma1))
        product = matmul(plant.phi, full)
        coefficient = -sum((product[i][i] for i in range(n)), mpf(0)) / (index + 1)
        denominator.append(coefficient)
        full = [[product[i][j] + (coefficient if i == j else 0) for j in range(n)] for i in range(n)]
        left = [_dot(plant.c, [full[i][j] for i in range(n)]) for j in range(n)]
    if plant.fraction == 0 and plant.d == 0:
        return trimmed(now or [mpf(0)]), denominator, plant.whole
    numerator = [mpf(0), *now, mpf(0)]
    for index, value in enumerate(before):
        numerator[2 + index] += value
    for index, value in enumerate(denominator):
        numerator[1 + index] += plant.d * value
    return trimmed(numerator), [*denominator, mpf(0)], plant.whole


def roots_outside(polynomial: Polynomial, radius: Any = 1) -> int:
    """How many roots lie outside the circle of this radius, by Schur and Cohn's recursion.

    OnTheCircleError where a leading coefficient vanishes, as it does for a root on the circle.
    """
    with mp.workdps(DIGITS + 30 + len(polynomial)):
        coefficients = [
            value * mpf(radius) ** power for power, value in enumerate(reversed(trimmed(polynomial)))
        ]
        inside, sign = 0, 1
        degree = len(coefficients) - 1
        while len(coefficients) > 1:
            low, high = coefficients[0], coefficients[-1]
            size = max(abs(value) for value in coefficients)
            if abs(abs(low) - abs(high)) < mpf(10) ** -(DIGITS - 10) * max(abs(low), abs(high)) or size == 0:
                raise OnTheCircleError("a root on the circle, or a pair that mirrors in it")
            if abs(low) > abs(high):
                # roots inside and outside change places
                inside += sign * (len(coefficients) - 1)
                sign, coefficients = -sign, coefficients[::-1]
                low, high = high, low
            factor = low / high
            reduced = [
                value - factor * mirrored
                for value, mirrored in zip(coefficients, reversed(coefficients), strict=True)
            ][1:]
            largest = max(abs(value) for value in reduced)
            coefficients = [value / largest for value in reduced]
            inside += sign
        return degree - inside


def closed_loop_roots(polynomial: Polynomial) -> list[Any]:
    """The roots, outermost first; of a long polynomial those of the largest magnitude."""
    return list(_closed_loop_roots(tuple(trimmed(polynomial))))


@lru_cache(maxsize=64)
def _closed_loop_roots(polynomial: tuple[Any, ...]) -> list[Any]:
    at_origin = 0
    while len(polynomial) > 1 and polynomial[-1] == 0:
        polynomial, at_origin = polynomial[:-1], at_origin + 1
    degree = len(polynomial) - 1
    if degree == 0:
        return [mpc(0)] * at_origin
    with mp.workdps(DIGITS):
        monic = [value / polynomial[0] for value in polynomial]
        starts = np.roots([float(value) for value in monic])
        starts = np.concatenate([starts, np.zeros(degree - len(starts))])
        starts = starts[np.argsort(-np.abs(starts))]
        if degree > MOST_ROOTS_TOGETHER:
            found = [_newton(monic, mpc(start)) for start in starts[:OUTERMOST]]
        else:
            # equal starts would divide by 0
            spread = [1e-9 * (index + 1) * np.exp(2.4j * index) for index in range(degree)]
            found = _aberth(monic, [mpc(complex(z + dz)) for z, dz in zip(starts, spread, strict=True)])
    return sorted(found, key=lambda root: -abs(root)) + [mpc(0)] * at_origin


def _aberth(monic: list[Any], roots: list[Any]) -> list[Any]:
    slope = [c * (len(monic) - 1 - i) for i, c in enumerate(monic[:-1])]
    moving = set(range(len(roots)))
    for _ in range(400):
        for index in sorted(moving):
            z = roots[index]
            at_slope = value_at(slope, z)
            if at_slope == 0:
                roots[index] = z + mpf("1e-12")
                continue
            newton = value_at(monic, z) / at_slope
            others = sum((1 / (z - other) for place, other in enumerate(roots) if place != index), mpc(0))
            step = newton / (1 - newton * others)
            roots[index] = z - step
            if abs(step) < mpf("1e-35") * max(abs(z), mpf("1e-12")):
                moving.discard(index)
        if not moving:
            return roots
    return roots


def _newton(monic: list[Any], root: Any) -> Any:
    slope = [c * (len(monic) - 1 - i) for i, c in enumerate(monic[:-1])]
    for _ in range(12):
        step = value_at(monic, root) / value_at(slope, root)
        root -= step
        if abs(step) < mpf("1e-35") * abs(root):
            break
    return root


def spectral_radius(polynomial: Polynomial) -> Any:
    """The largest magnitude of a root, confirmed by counting just inside and just outside of it."""
    radius = abs(closed_loop_roots(polynomial)[0])
    if radius > 0:
        step = mpf("1e-11")
        inner, outer = (
            roots_outside(polynomial, radius * (1 - step)),
            roots_outside(polynomial, radius * (1 + step)),
        )
        if outer != 0 or inner == 0:
            raise ValueError(
                f"the radius {mp.nstr(radius, 15)} has {outer} roots outside and {inner} from it on"
            )
    return radius


def matmul(one: Any, other: Any) -> Any:
    """The product of two matrices as lists of rows."""
    columns = list(zip(*other, strict=True))
    return [[_dot(row, column) for column in columns] for row in one]


def _dot(one: Any, other: Any) -> Any:
    return mp.fdot(one, other)


def _identity(size: int) -> Any:
    return [[mpf(1 if row == column else 0) for column in range(size)] for row in range(size)]
