"""L(jω) on the positive axis: its continuous phase, where it turns, and every crossover.

The magnitude does not depend on dead time and the phase is a sum of arctangents less ωθ, so both are known
without unwrapping. The grid is fine relative to the distance from jω to the nearest zero or pole; between two of
its points magnitude and phase turn at most once, and each is split there, so that a crossover is bracketed on a
monotone piece and the list is complete. Where Newton does not contract, the bracket is halved.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from service.analysis.loop import Complexes, OpenLoop, Reals

FINE_STEP = 0.25
"""Grid step relative to the distance to the nearest zero or pole."""

COARSE_STEP = 0.7
"""The same, in ln ω, where L is a power of ω to three digits."""

LISTED_FACTORS = (0.01, 100.0)
"""Gain factors for which phase crossovers are listed."""

MAX_LISTED = 50
MAX_PHASE_TARGETS = 20_000
"""Work bound: so many crossings of -180° are looked at; past it margins are not computed."""


class WorkBoundError(Exception):
    """More work than the stated bound; what was asked for is left undecided."""


ValueAndSlope = Callable[[Reals], tuple[Reals, Reals]]


@dataclass(frozen=True, eq=False)
class AxisResponse:
    """ln L and its derivative by ω on a grid of ω > 0, shapes (k,), increasing; the phase is continuous.

    `truncated_phase` is True where the work bound cut the list of phase crossovers.
    """

    loop: OpenLoop
    omega: Reals
    log_response: Complexes
    log_slope: Complexes

    @staticmethod
    def of(loop: OpenLoop) -> AxisResponse:
        """Sample the loop on its own grid."""
        omega = frequency_grid(loop)
        return AxisResponse(loop, omega, log_response(loop, omega), 1j * loop.log_derivative(1j * omega))

    @cached_property
    def gain_crossovers(self) -> Reals:
        """Every ω > 0 where abs L = 1, increasing, shape (m,)."""

        def magnitude(omega: Reals) -> tuple[Reals, Reals]:
            return log_response(self.loop, omega).real, -self.loop.log_derivative(1j * omega).imag

        omega, values, _ = self._split_at_turns(self.log_response.real, self.log_slope.real, magnitude)
        rises = np.flatnonzero((values[:-1] > 0) != (values[1:] > 0))
        if not rises.size:
            return np.empty(0)
        return solve_brackets(magnitude, omega[rises], omega[rises + 1], values[rises])

    @cached_property
    def _phase_pieces(self) -> tuple[Reals, Reals, Reals]:
        def phase(omega: Reals) -> tuple[Reals, Reals]:
            return log_response(self.loop, omega).imag, self.loop.log_derivative(1j * omega).real

        omega, values, inserted = self._split_at_turns(self.log_response.imag, self.log_slope.imag, phase)
        magnitudes = np.empty_like(omega)
        magnitudes[~inserted] = self.log_response.real
        if inserted.any():
            magnitudes[inserted] = log_response(self.loop, omega[inserted]).real
        return omega, values, magnitudes

    @cached_property
    def phase_crossovers(self) -> tuple[Reals, Reals]:
        """Where L is real and negative: ω, increasing, and ln abs L there, shapes (m,).

        Complete for abs L ≥ 0.01, and to lower values until one with abs L < 1 is found or none is left.
        Raises WorkBoundError where there are too many.
        """
        floor = math.log(1.0 / LISTED_FACTORS[1])
        lowest = float(self.log_response.real.min())
        while True:
            omega, logs = self._phase_crossovers_above(floor - 0.1)
            if np.any(logs < 0) or floor < lowest:
                return omega, logs
            floor -= math.log(100.0)

    def _phase_crossovers_above(self, log_floor: float) -> tuple[Reals, Reals]:
        omega, phase, magnitudes = self._phase_pieces
        turns = np.floor((phase + math.pi) / (2 * math.pi))
        relevant = np.maximum(magnitudes[:-1], magnitudes[1:]) >= log_floor - 0.5
        # a phase that stands still at -180° is not crossed; only rounding moves it
        moves = np.abs(np.diff(phase)) > 1e-12
        pieces = np.flatnonzero((turns[:-1] != turns[1:]) & relevant & moves)
        counts = np.abs(turns[pieces + 1] - turns[pieces]).astype(int)
        if counts.sum() > MAX_PHASE_TARGETS:
            raise WorkBoundError("too many crossings of -180°")
        piece = np.repeat(pieces, counts)
        if not piece.size:
            return np.empty(0), np.empty(0)
        within = np.arange(len(piece)) - np.repeat(np.cumsum(counts) - counts, counts)
        falling = turns[piece + 1] < turns[piece]
        turn = np.where(falling, turns[piece] - within, turns[piece] + 1 + within)
        target = turn * (2 * math.pi) - math.pi

        def from_target(at: Reals) -> tuple[Reals, Reals]:
            return log_response(self.loop, at).imag - target, self.loop.log_derivative(1j * at).real

        solved = np.sort(solve_brackets(from_target, omega[piece], omega[piece + 1], phase[piece] - target))
        return solved, log_response(self.loop, solved).real

    def _split_at_turns(
        self, values: Reals, slopes: Reals, function: ValueAndSlope
    ) -> tuple[Reals, Reals, np.ndarray]:  # type: ignore[type-arg]
        """The grid with the turning points of a function put in: ω, values, and which were put in."""
        turning = np.flatnonzero((slopes[:-1] > 0) != (slopes[1:] > 0))
        if not turning.size:
            return self.omega, values, np.zeros(len(values), dtype=bool)
        low, high = self.omega[turning].copy(), self.omega[turning + 1].copy()
        rising = slopes[turning] > 0
        for _ in range(12):
            middle = 0.5 * (low + high)
            same = (function(middle)[1] > 0) == rising
            low, high = np.where(same, middle, low), np.where(same, high, middle)
        middle = 0.5 * (low + high)
        at = turning + 1
        inserted = np.insert(np.zeros(len(values), dtype=bool), at, True)
        return np.insert(self.omega, at, middle), np.insert(values, at, function(middle)[0]), inserted


def log_response(loop: OpenLoop, omega: Reals) -> Complexes:
    """ln L(jω) with a phase that is continuous in ω > 0 but for poles and zeros on the axis; shape of `omega`."""
    return (
        log_factors(omega, loop.zeros)
        - log_factors(omega, loop.poles)
        + (loop.log_gain + 1j * (math.pi if loop.sign < 0 else 0.0) - 1j * omega * loop.dead_time)
    )


def log_factors(omega: Reals, roots: Complexes) -> Complexes:
    """Σ ln(jω − r) with continuous argument, shape of `omega`.

    Left of the axis the principal argument runs from -90° to 90°; right of it the factor is turned about, and
    runs from 270° to 90°.
    """
    right = roots.real > 0
    turned = np.where(right, -1.0, 1.0)
    with np.errstate(divide="ignore"):
        logs: Complexes = np.log((1j * omega[..., None] - roots) * turned).sum(-1)
    return logs + 1j * math.pi * int(np.count_nonzero(right))


def frequency_grid(loop: OpenLoop) -> Reals:
    """Frequencies ω > 0, increasing, so dense that magnitude and phase turn at most once between two of them."""
    roots = np.concatenate([loop.zeros, loop.poles])
    magnitudes = np.abs(roots)
    marks = [float(m) for m in magnitudes if m > 0] + _asymptote_marks(loop)
    if loop.dead_time > 0:
        marks.append(1.0 / loop.dead_time)
    low, high = (min(marks), max(marks)) if marks else (1.0, 1.0)
    parts = [
        _log_spaced(1e-4 * low, 0.1 * low, COARSE_STEP),
        _log_spaced(0.1 * low, 10 * high, FINE_STEP),
        _log_spaced(10 * high, 1e4 * high, COARSE_STEP),
    ]
    parts += [_near_root(root) for root in roots if root.imag > 0 and abs(root.real) < 0.5 * root.imag]
    return np.unique(np.concatenate(parts))


def _asymptote_marks(loop: OpenLoop) -> list[float]:
    """Frequencies where the low and high asymptote reach 1 and the ends of the listed range."""
    marks = []
    low_order, high_order = loop.order_at_origin, loop.excess
    for level in (0.0, *(math.log(factor) for factor in LISTED_FACTORS)):
        if low_order != 0:
            marks.append((math.log(abs(loop.origin_coefficient)) - level) / low_order)
        if high_order != 0:
            marks.append((loop.log_gain - level) / high_order)
    return [math.exp(min(max(mark, -200.0), 200.0)) for mark in marks]


def _log_spaced(low: float, high: float, step: float) -> Reals:
    count = max(2, math.ceil(math.log(high / low) / step) + 1)
    return np.exp(np.linspace(math.log(low), math.log(high), count))


def _near_root(root: complex) -> Reals:
    """Frequencies about a light resonance, spaced by the distance to it."""
    width, centre = abs(root.real), root.imag
    if width < 1e-9 * centre:
        offsets = centre * np.exp(-np.arange(0.5, 26.0, 2 * FINE_STEP))
    else:
        offsets = width * np.sinh(np.arange(0.0, math.asinh(0.7 * centre / width) + FINE_STEP, FINE_STEP))
    both: Reals = np.concatenate([centre - offsets, centre + offsets])
    return both[both > 0]


def solve_brackets(function: ValueAndSlope, low: Reals, high: Reals, value_low: Reals) -> Reals:
    """Roots of a function, one in each bracket, to float64; Newton where it contracts, halving where not.

    `function` takes and returns arrays of the brackets' shape; `value_low` is its value at `low`.
    """
    low, high = low.copy(), high.copy()
    above = value_low > 0
    at = 0.5 * (low + high)
    previous = high - low
    for _ in range(200):
        value, slope = function(at)
        left = (value > 0) == above
        low, high = np.where(left, at, low), np.where(left, high, at)
        with np.errstate(all="ignore"):
            newton = at - value / slope
        tolerance = 2e-16 * np.abs(at)
        contracts = np.abs(newton - at) <= np.maximum(0.5 * previous, 4 * tolerance)
        # Newton steps to within rounding of the bracket's end are taken as they are
        inside = (newton >= low) & (newton <= high)
        step_to = np.where(contracts & inside, newton, 0.5 * (low + high))
        previous = np.abs(step_to - at)
        at = step_to
        if np.all((previous <= tolerance) | (value == 0)):
            break
    return at
