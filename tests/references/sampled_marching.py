"""What a loop does from scan to scan, by the controller's own difference equations, and between the scans.

The controller is written down as a program would run it: an integral that is added to, a derivative from the
difference of two scans, a filtered measured value. The plant goes from scan to scan by the
matrices of `sampled_told`; between scans its answer to the held output is looked at on pieces that are short
against its modes, and every turn and passage is found on the answer itself.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from mpmath import mp
from scipy.linalg import expm
from scipy.optimize import brentq

from tests.references.sampled_told import ExactSampledLoop, companion
from tests.references.told import trimmed

SETPOINT, LOAD, NOISE, SPARED = range(4)
"""Unit steps of set point and load, noise of 1 at the first scan, the same with the derivative spared."""

PIECE = 0.25
MOST_PIECES = 800
TERMS = 20

_NODES, _WEIGHTS = (lambda x, w: (0.5 * (x + 1.0), 0.5 * w))(*np.polynomial.legendre.leggauss(8))


@dataclass(frozen=True)
class Marched:
    """At `count` scans: the plant's states (count, n, 4), w[n−k−1], w[n−k] and u (count, 4)."""

    loop: ExactSampledLoop
    states: Any
    old: Any
    new: Any
    output: Any


class Rule:
    """One term b0 + … of a substituted ratio of degree 1 or less: y = (up0·x + up1·x₋ − down1·y₋)/down0."""

    def __init__(self, loop: ExactSampledLoop, numerator: list[float], denominator: list[float]) -> None:
        up, down = loop.substituted(
            trimmed([mp.mpf(v) for v in numerator]), trimmed([mp.mpf(v) for v in denominator])
        )
        self._up, self._down = [float(v) for v in up], [float(v) for v in down]
        order = len(down) - 1
        self._inputs, self._outputs = [np.zeros(4)] * order, [np.zeros(4)] * order

    def __call__(self, value: Any) -> Any:
        """This scan's output for this scan's input."""
        total = self._up[0] * value
        for coefficient, past in zip(self._up[1:], self._inputs, strict=True):
            total = total + coefficient * past
        for coefficient, past in zip(self._down[1:], self._outputs, strict=True):
            total = total - coefficient * past
        total = total / self._down[0]
        if self._inputs:
            self._inputs = [value, *self._inputs[:-1]]
            self._outputs = [total, *self._outputs[:-1]]
        return total


def program(loop: ExactSampledLoop, controller: Any) -> Callable[[Any, Any, Any], Any]:
    """u from set point, measured value, and measured value as the derivative sees it; (4,) each."""
    told = loop.told
    tf, filter_time = float(told.tf), float(told.measurement_filter)
    filters = [Rule(loop, [1.0], [filter_time, 1.0]) for _ in range(2)]
    b, c = _weights(controller)
    sign = told.direction
    path: Callable[[Any, Any, Any], Any]
    if controller.form == "series":
        path = _series(loop, controller, tf, b, c)
    elif controller.form == "two_zeros":
        path = _two_zeros(loop, controller, tf, b, c)
    else:
        kp, ki, kd = (float(term) for term in (told.feedback.kp, told.feedback.ki, told.feedback.kd))
        integral, derivative = Rule(loop, [ki], [1.0, 0.0]), Rule(loop, [kd, 0.0], [tf, 1.0])

        def path(r: Any, y: Any, y_derivative: Any) -> Any:
            return kp * (b * r - y) + integral(r - y) + derivative(c * r - y_derivative)

    return lambda r, y, y_derivative: sign * path(r, filters[0](y), filters[1](y_derivative))


def _series(
    loop: ExactSampledLoop, controller: Any, tf: float, b: float, c: float
) -> Callable[[Any, Any, Any], Any]:
    """Kc·[(b·x − y) + (x − y)/(Ti·s)], x = (1 + c·D)·SP, y = (1 + D)·PV."""
    kc, ti, td = _entered(controller)
    lead = [Rule(loop, [td - tf, 0.0], [tf, 1.0]) if td else (lambda value: 0.0 * value) for _ in range(2)]
    integral = Rule(loop, [1.0], [ti, 0.0]) if ti else (lambda value: 0.0 * value)

    def path(r: Any, pv: Any, pv_derivative: Any) -> Any:
        x, y = r + c * lead[0](r), pv + lead[1](pv_derivative)
        return kc * ((b * x - y) + integral(x - y))

    return path


def _two_zeros(
    loop: ExactSampledLoop, controller: Any, tf: float, b: float, c: float
) -> Callable[[Any, Any, Any], Any]:
    """k·(s−z1)·(s−z2)/(s·(1+Tf·s)), each power of s a rule of its own."""
    zeros = [complex(*z) if isinstance(z, tuple) else complex(z) for z in controller.zeros_rad_s]
    k = controller.gain
    square = k if len(zeros) == 2 else 0.0
    linear = -k * sum(zeros).real if len(zeros) == 2 else k
    constant = k * np.prod(zeros).real if len(zeros) == 2 else -k * zeros[0].real
    over = [tf, 1.0, 0.0]
    rules = [
        Rule(loop, [square, 0.0], over[:2]),
        Rule(loop, [linear], over[:2]),
        Rule(loop, [constant], over),
    ]

    def path(r: Any, y: Any, y_derivative: Any) -> Any:
        return rules[0](c * r - y_derivative) + rules[1](b * r - y) + rules[2](r - y)

    return path


def _entered(controller: Any) -> tuple[float, float, float]:
    kc = controller.proportional.value
    kc = kc if controller.proportional.unit == "gain" else 100.0 / kc
    for term in (controller.integral, controller.derivative):
        if term is not None and term.unit != "seconds":
            raise ValueError("this reference reads seconds")
    ti = controller.integral.value if controller.integral else 0.0
    return kc, ti, controller.derivative.value if controller.derivative else 0.0


def _weights(controller: Any) -> tuple[float, float]:
    return controller.setpoint_weight.proportional, controller.setpoint_weight.derivative


def march(loop: ExactSampledLoop, controller: Any, count: int) -> Marched:
    """The four answers at `count` scans."""
    plant = loop.plant()
    n, k = len(plant.phi), plant.whole
    phi = np.array([[float(v) for v in row] for row in plant.phi]).reshape(n, n)
    gamma0, gamma1 = (np.array([float(v) for v in g])[:, None] for g in (plant.gamma0, plant.gamma1))
    c, d = np.array([float(v) for v in plant.c]), float(plant.d)
    put_out = program(loop, controller)
    wanted, load = np.zeros(4), np.zeros(4)
    wanted[SETPOINT], load[LOAD] = 1.0, 1.0
    x = np.zeros((n, 4))
    held = np.zeros((count + k + 1, 4))  # w from scan −k−1 on
    states, output = np.zeros((count, n, 4)), np.zeros((count, 4))
    for index in range(count):
        pv = c @ x + d * held[index]
        noise, seen = np.zeros(4), np.zeros(4)
        if index == 0:
            noise[NOISE] = noise[SPARED] = seen[NOISE] = 1.0
        u = put_out(wanted, pv + noise, pv + seen)
        held[index + k + 1] = u + load
        states[index], output[index] = x, u
        x = phi @ x + gamma0 * held[index + 1] + gamma1 * held[index]
    return Marched(loop, states, held[:count], held[1 : count + 1], output)


@dataclass(frozen=True)
class NoiseMeasures:
    """Per unit standard deviation of white noise at each scan."""

    output_std: float
    output_travel: float
    derivative_share: float


def noise_measures(marched: Marched) -> NoiseMeasures:
    """By the sum of squares of the answer to one scan's noise."""
    pulse, spared = marched.output[:, NOISE], marched.output[:, SPARED]
    variance = float((pulse**2).sum())
    moves = np.diff(pulse, prepend=0.0)
    share = 1.0 - float((spared**2).sum()) / variance if variance else 0.0
    return NoiseMeasures(np.sqrt(variance), np.sqrt(2.0 / np.pi * (moves**2).sum()), share)


class Answer:
    """PV between the scans for one of the two steps: pieces, and the exact answer on each."""

    def __init__(self, marched: Marched, which: int) -> None:
        loop = marched.loop
        plant = loop.plant()
        a, b, c, d = companion(loop.told.plant_numerator, loop.told.plant_denominator)
        n = len(a)
        self._m = np.zeros((n + 1, n + 1))
        for row in range(n):
            self._m[row] = [*map(float, a[row]), float(b[row])]
        self._row = np.array([*map(float, c), float(d)])
        h, fraction = float(loop.interval), float(plant.fraction)
        fastest = float(np.abs(np.linalg.eigvals(self._m)).max())
        # Taylor's series on a piece is good for this norm, whatever the modes
        fastest = max(fastest, float(np.abs(self._m).sum(axis=1).max()) / 4.0)
        lengths, acting = [], []
        for length, input_place in ((fraction * h, 0), ((1 - fraction) * h, 1)):
            if length > 0:
                parts = min(MOST_PIECES, max(1, int(np.ceil(fastest * length / PIECE))))
                lengths += [length / parts] * parts
                acting += [input_place] * parts
        at = np.concatenate([marched.states[:, :, which], np.zeros((len(marched.states), 1))], axis=1)
        inputs = (marched.old[:, which], marched.new[:, which])
        count = len(at)
        self.length = np.tile(lengths, count)
        offsets = np.concatenate([[0.0], np.cumsum(lengths)[:-1]])
        self.start = (np.arange(count)[:, None] * h + offsets).ravel()
        pieces = len(lengths)
        self._at = np.zeros((count, pieces, n + 1))
        self.nodes = np.zeros((count, pieces, len(_NODES)))
        self.ends = np.zeros((count, pieces, 2))
        self.slopes = np.zeros((count, pieces, 2))
        steppers = {
            length: ([expm(self._m * (length * node)) for node in _NODES], expm(self._m * length))
            for length in set(lengths)
        }
        slope_row = self._row @ self._m
        for piece in range(pieces):
            at[:, n] = inputs[acting[piece]]
            self._at[:, piece] = at
            inside, whole = steppers[lengths[piece]]
            self.ends[:, piece, 0], self.slopes[:, piece, 0] = at @ self._row, at @ slope_row
            for index, matrix in enumerate(inside):
                self.nodes[:, piece, index] = at @ (matrix.T @ self._row)
            at = at @ whole.T
            self.ends[:, piece, 1], self.slopes[:, piece, 1] = at @ self._row, at @ slope_row
        total = count * pieces
        self._at = self._at.reshape(total, n + 1)
        self.nodes = self.nodes.reshape(total, -1)
        self.ends, self.slopes = self.ends.reshape(total, 2), self.slopes.reshape(total, 2)
        self._slope_row = slope_row
        self._turns()

    def value(self, piece: int, time: float) -> float:
        """PV so long after the start of a piece."""
        return float(self._row @ self._after(piece, time))

    def slope(self, piece: int, time: float) -> float:
        """Its slope."""
        return float(self._slope_row @ self._after(piece, time))

    def _after(self, piece: int, time: float) -> Any:
        """State and input so long after the start of a piece: Taylor's series, since a piece is short."""
        start = total = self._at[piece]
        matrix = self._m * time
        for order in range(TERMS, 0, -1):
            total = start + matrix @ total / order
        return total

    def _turns(self) -> None:
        """Where PV turns within a piece, as a cubic says it; sharpened where it matters."""
        turning = np.flatnonzero(self.slopes[:, 0] * self.slopes[:, 1] < 0)
        share = self.slopes[turning, 0] / (self.slopes[turning, 0] - self.slopes[turning, 1])
        near = np.clip(np.round(share * len(_NODES) - 0.5).astype(int), 0, len(_NODES) - 1)
        rough = self.nodes[turning, near]
        self.high, self.low = self.ends.max(axis=1), self.ends.min(axis=1)
        self.high[turning] = np.maximum(self.high[turning], rough)
        self.low[turning] = np.minimum(self.low[turning], rough)
        self.turning = set(turning.tolist())

    def turn(self, piece: int) -> float:
        """The time within the piece at which it turns."""
        length = float(self.length[piece])
        if self.slope(piece, 0.0) * self.slope(piece, length) >= 0:
            # rounding beside a turn that lies on an end
            return 0.0 if abs(self.slope(piece, 0.0)) < abs(self.slope(piece, length)) else length
        return float(brentq(lambda t: self.slope(piece, t), 0.0, length, xtol=1e-15 * length, rtol=1e-14))

    def extremum(self, sign: float) -> tuple[float, float]:
        """(time, value) of the highest (1) or lowest (−1) point."""
        rough = self.high if sign > 0 else -self.low
        top = rough.max()
        candidates = np.flatnonzero(rough >= top - 0.05 * abs(top) - 1e-12)
        candidates = candidates[np.argsort(-rough[candidates])][:12]
        found = []
        for piece in candidates.tolist():
            times = [0.0, float(self.length[piece])] + ([self.turn(piece)] if piece in self.turning else [])
            found += [(sign * self.value(piece, t), float(self.start[piece]) + t) for t in times]
        # PV that stays level is at its extremum from the first of those times on
        best = max(found)[0]
        first = min(time for value, time in found if value >= best - 4e-16 * abs(best))
        return first, sign * best

    def at(self, time: float) -> float:
        """PV at a time, where a jump falls on it before the jump."""
        piece = max(int(np.searchsorted(self.start, time)) - 1, 0)
        return self.value(piece, time - float(self.start[piece]))

    def _passages(self, piece: int, level: float) -> list[float]:
        """Times within the piece at which PV passes the level."""
        length = float(self.length[piece])
        at = [0.0, *([self.turn(piece)] if piece in self.turning else []), length]
        found = []
        for low, high in pairwise(at):
            if (self.value(piece, low) - level) * (self.value(piece, high) - level) < 0:
                found.append(
                    float(
                        brentq(
                            lambda t: self.value(piece, t) - level, low, high, xtol=1e-15 * length, rtol=1e-14
                        )
                    )
                )
        return found

    def first_passage(self, level: float) -> float | None:
        """The first time at which PV has reached the level, coming from 0; None where it never does."""
        side = 1.0 if level > 0 else -1.0
        rough = self.high if side > 0 else -self.low
        for piece in np.flatnonzero(rough >= side * level - 1e-3 * abs(level)).tolist():
            if side * self.ends[piece, 0] >= side * level:
                return float(self.start[piece])
            if passages := self._passages(piece, level):
                return float(self.start[piece]) + passages[0]
            if side * self.ends[piece, 1] >= side * level:
                return float(self.start[piece] + self.length[piece])
        return None

    def last_outside(self, final: float, band: float) -> float:
        """The last time at which PV is outside the band about its final value."""
        outside = np.flatnonzero((self.high > final + 0.999 * band) | (self.low < final - 0.999 * band))
        for piece in outside[::-1].tolist():
            if abs(self.ends[piece, 1] - final) > band:
                return float(self.start[piece] + self.length[piece])
            if times := self._passages(piece, final + band) + self._passages(piece, final - band):
                return float(self.start[piece]) + max(times)
            if abs(self.ends[piece, 0] - final) > band:
                return float(self.start[piece])
        return 0.0

    def integrals(self, level: float) -> tuple[float, float, float, float]:
        """∫abs e, ∫e², ∫t·abs e and ∫e of e = level − PV, split where e changes sign."""
        error = level - self.nodes
        weight = self.length[:, None] * _WEIGHTS
        time = self.start[:, None] + self.length[:, None] * _NODES
        absolute, timed = (weight * np.abs(error)).sum(axis=1), (weight * time * np.abs(error)).sum(axis=1)
        ends, largest = level - self.ends, np.abs(error).max(axis=1)
        changing = (ends[:, 0] * ends[:, 1] < 0) | ((error.min(axis=1) < 0) & (error.max(axis=1) > 0))
        for piece in np.flatnonzero(changing & (largest > 1e-7 * largest.max())).tolist():
            length = float(self.length[piece])
            at = [0.0, *sorted(self._passages(piece, level)), length]
            absolute[piece] = timed[piece] = 0.0
            for low, high in pairwise(at):
                times = low + (high - low) * _NODES
                values = np.array([abs(level - self.value(piece, t)) for t in times])
                absolute[piece] += (high - low) * float(_WEIGHTS @ values)
                timed[piece] += (high - low) * float(_WEIGHTS @ ((self.start[piece] + times) * values))
        return (
            float(absolute.sum()),
            float((weight * error**2).sum()),
            float(timed.sum()),
            float((weight * error).sum()),
        )


@dataclass(frozen=True)
class SetpointMeasures:
    """Of a unit step of the set point."""

    rise_time: float | None
    settling_time: float
    overshoot_percent: float
    undershoot_percent: float
    peak_time: float
    answer: Answer
    iae: float
    ise: float
    itae: float
    output_peak: float
    output_total_variation: float


@dataclass(frozen=True)
class LoadMeasures:
    """Of a unit step of the load."""

    peak_deviation: float
    peak_time: float
    answer: Answer
    recovery_time: float
    iae: float
    integrated_error: float


def setpoint_measures(marched: Marched, final: float, band_percent: float = 2.0) -> SetpointMeasures:
    """Every metric, times in seconds; the march has to be long enough for its integrals."""
    answer = Answer(marched, SETPOINT)
    side = float(np.sign(final))
    peak_time, peak = answer.extremum(side)
    low = answer.extremum(-side)[1]
    iae, ise, itae, _ = answer.integrals(1.0)
    tenth, nine_tenths = answer.first_passage(0.1 * final), answer.first_passage(0.9 * final)
    output = marched.output[:, SETPOINT]
    return SetpointMeasures(
        rise_time=None if tenth is None or nine_tenths is None else nine_tenths - tenth,
        settling_time=answer.last_outside(final, abs(final) * band_percent / 100.0),
        overshoot_percent=100.0 * max(0.0, peak / final - 1.0),
        undershoot_percent=100.0 * max(0.0, -low / final),
        peak_time=peak_time,
        answer=answer,
        iae=iae,
        ise=ise,
        itae=itae,
        output_peak=float(np.abs(output).max()),
        output_total_variation=float(np.abs(np.diff(output, prepend=0.0)).sum()),
    )


def load_measures(marched: Marched, final: float) -> LoadMeasures:
    """Every metric of a load step; the set point stays at 0."""
    answer = Answer(marched, LOAD)
    peak_time, peak = max((answer.extremum(sign) for sign in (1.0, -1.0)), key=lambda found: abs(found[1]))
    iae, _, _, error = answer.integrals(0.0)
    return LoadMeasures(
        peak_deviation=peak,
        peak_time=peak_time,
        answer=answer,
        recovery_time=answer.last_outside(final, 0.05 * max(abs(peak), abs(final))),
        iae=iae,
        integrated_error=error,
    )
