"""L(jω) on the positive axis: its continuous phase, where it turns, and every crossover.

The magnitude does not depend on dead time and the phase is a sum of arctangents less ωθ, so both are known
without unwrapping. The grid is fine relative to the distance from jω to the nearest zero or pole; between two
of its points magnitude and phase turn at most once, and each is split there, so that a crossover is bracketed
on a monotone piece and the list is complete.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import numpy.typing as npt

from service.analysis.brackets import newton_zero, newton_zero_of_one, zeros_in_steps
from service.analysis.loop import Complexes, OpenLoop, Reals

FINE_STEP = 0.25
"""Grid step relative to the distance to the nearest zero or pole."""

COARSE_STEP = 0.7
"""The same, in ln ω, where L is a power of ω to three digits."""

LISTED_FACTORS = (0.01, 100.0)
"""Gain factors for which phase crossovers are listed."""

MAX_LISTED = 50

TURN_PLACE = 1e-4
"""A turn is placed to this, relatively: it only splits a bracket."""

Indices = npt.NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class AxisResponse:
    """ln L and its derivative by ω on a grid of ω > 0, shapes (k,), increasing; the phase is continuous."""

    loop: OpenLoop
    omega: Reals
    log_response: Complexes
    log_slope: Complexes

    @staticmethod
    def of(loop: OpenLoop) -> AxisResponse:
        """Sample the loop on its own grid."""
        omega = frequency_grid(loop)
        return AxisResponse(loop, omega, *loop.on_axis(omega))

    @cached_property
    def _magnitude_turns(self) -> Reals:
        """Where abs L turns, shape (t,)."""
        return self._turns(self.log_slope.real, lambda omega: self.loop.log_magnitude_at(omega)[1])

    @cached_property
    def gain_crossovers(self) -> Reals:
        """Every ω > 0 where abs L = 1, increasing, shape (m,)."""
        omega, logs = self._with_points(self._magnitude_turns)
        values = logs.real
        crossed = np.flatnonzero((values[:-1] > 0) != (values[1:] > 0))
        low, high, at_low, at_high = omega[crossed], omega[crossed + 1], values[crossed], values[crossed + 1]
        # abs L is nearly a power of ω
        start = low * (high / low) ** (at_low / (at_low - at_high))
        brackets = zip(low.tolist(), high.tolist(), (at_low > 0).tolist(), start.tolist(), strict=True)
        told = self.loop.log_magnitude_at
        return np.array([newton_zero_of_one(told, *bracket) for bracket in brackets], np.float64)

    @cached_property
    def phase_crossovers(self) -> PhaseCrossings:
        """Where L is real and negative: the lowest of them, and those that bound the margins."""
        turns = self._turns(self.log_slope.imag, self.loop.phase_slope_at)
        # abs L is monotone between these: the first and last crossing between two of them bound the rest
        marks = np.sort(np.concatenate([self._magnitude_turns, self.gain_crossovers]))
        inserted = np.sort(np.concatenate([turns, marks]))
        omega, logs = self._with_points(inserted)
        phase, magnitude = logs.imag, logs.real
        rounds = np.floor((phase + math.pi) / (2 * math.pi))
        counts = np.abs(np.diff(rounds))
        # a phase that stands still at -180° is not crossed; only rounding moves it
        counts[(np.abs(np.diff(phase)) <= 1e-12) & (np.diff(omega) > 1e-9 * omega[:-1])] = 0
        chosen = _chosen_crossings(omega, magnitude, counts, marks)
        pieces, within = chosen.pieces, chosen.within
        falling = rounds[pieces + 1] < rounds[pieces]
        turn = np.where(falling, rounds[pieces] - within, rounds[pieces] + 1 + within)
        target = turn * (2 * math.pi) - math.pi
        if not pieces.size:
            return PhaseCrossings(np.empty(0), np.empty(0), chosen.truncated)

        def from_target(at: Reals) -> tuple[Reals, Reals]:
            values, slopes = self.loop.on_axis(at)
            return values.imag - target, slopes.imag

        # by the rounds, not by the phase at the low end: that is 0 where the crossing lies on it
        at_low = np.where(falling, 1.0, -1.0)
        solved = newton_zero(from_target, omega[pieces], omega[pieces + 1], at_low)
        return PhaseCrossings(solved, self.loop.log_response(solved).real, chosen.truncated)

    def _turns(self, slopes: Reals, slope_at: Callable[[float], float]) -> Reals:
        """Where a function of ω with these slopes on the grid turns, shape (t,)."""
        turning = np.flatnonzero((slopes[:-1] > 0) != (slopes[1:] > 0))
        return zeros_in_steps(slope_at, self.omega, slopes, turning, TURN_PLACE)

    def _with_points(self, more: Reals) -> tuple[Reals, Complexes]:
        """The grid and ln L on it with further frequencies put in."""
        if not more.size:
            return self.omega, self.log_response
        at = np.searchsorted(self.omega, more)
        logs = np.insert(self.log_response, at, self.loop.log_response(more))
        return np.insert(self.omega, at, more), logs


@dataclass(frozen=True, eq=False)
class PhaseCrossings:
    """ω, increasing, and ln abs L there, shapes (m,); `truncated`: there are more, which bound no margin."""

    omega: Reals
    log_magnitude: Reals
    truncated: bool


@dataclass(frozen=True, eq=False)
class _ChosenCrossings:
    pieces: Indices
    within: Reals
    truncated: bool


def _chosen_crossings(omega: Reals, magnitude: Reals, counts: Reals, marks: Reals) -> _ChosenCrossings:
    """Which crossings to solve for, each as its piece of the grid and its number in it.

    The lowest ones that can be listed, and the first and last of each stretch on which abs L is monotone.
    """
    crossed = np.flatnonzero(counts)
    low, high = (math.log(1.0 / factor) for factor in reversed(LISTED_FACTORS))
    near = (np.maximum(magnitude[crossed], magnitude[crossed + 1]) >= low) & (
        np.minimum(magnitude[crossed], magnitude[crossed + 1]) <= high
    )
    pairs: set[tuple[int, float]] = set()
    listed = 0
    for piece, count in zip(crossed[near].tolist(), counts[crossed[near]].tolist(), strict=True):
        wanted = int(min(count, MAX_LISTED + 1 - listed))
        pairs.update((piece, float(number)) for number in range(wanted))
        listed += wanted
        if listed > MAX_LISTED:
            break
    stretch = np.searchsorted(marks, 0.5 * (omega[crossed] + omega[crossed + 1]))
    first = np.flatnonzero(np.diff(stretch, prepend=-1))
    last = np.append(first[1:] - 1, len(crossed) - 1) if crossed.size else first
    pairs.update((piece, 0.0) for piece in crossed[first].tolist())
    pairs.update(zip(crossed[last].tolist(), (counts[crossed[last]] - 1.0).tolist(), strict=True))
    ordered = sorted(pairs)
    pieces = np.array([piece for piece, _ in ordered], dtype=np.intp)
    return _ChosenCrossings(pieces, np.array([number for _, number in ordered]), listed > MAX_LISTED)


def log_factors(omega: Reals, roots: Complexes) -> Complexes:
    """Σ ln(jω − r) with the continuous argument of `OpenLoop.on_axis`, shape of `omega`."""
    right = roots.real > 0
    logs = np.log((1j * omega[..., None] - roots) * np.where(right, -1.0, 1.0)).sum(-1)
    return np.asarray(logs + 1j * math.pi * int(np.count_nonzero(right)))


def frequency_grid(loop: OpenLoop) -> Reals:
    """Frequencies ω > 0, increasing, so dense that magnitude and phase turn at most once between two of
    them.
    """
    roots = np.concatenate([loop.zeros, loop.poles])
    marks = [abs(root) for root in roots.tolist() if root != 0] + _asymptote_marks(loop)
    if loop.dead_time > 0:
        marks.append(1.0 / loop.dead_time)
    low, high = (min(marks), max(marks)) if marks else (1.0, 1.0)
    parts = [
        _log_spaced(1e-4 * low, 0.1 * low, COARSE_STEP),
        _log_spaced(0.1 * low, 10 * high, FINE_STEP),
        _log_spaced(10 * high, 1e4 * high, COARSE_STEP),
    ]
    parts += [
        _near_root(root) for root in roots.tolist() if root.imag > 0 and abs(root.real) < 0.5 * root.imag
    ]
    return distinct(np.concatenate(parts))


def distinct(values: Reals) -> Reals:
    """The values increasing, each once. numpy's own `unique` loads masked arrays, which takes longer than the
    rest.
    """
    values = np.sort(values)
    return np.asarray(values[np.append(True, np.diff(values) > 0)])


def _asymptote_marks(loop: OpenLoop) -> list[float]:
    """Frequencies where the low and high asymptote reach 1 and the ends of the listed range."""
    if loop.sign == 0:
        return []
    marks = []
    low_order, high_order = loop.order_at_origin, loop.excess
    for level in (0.0, *(math.log(factor) for factor in LISTED_FACTORS)):
        if low_order != 0:
            marks.append((loop.log_origin_coefficient - level) / low_order)
        if high_order != 0:
            marks.append((loop.log_gain - level) / high_order)
    return [math.exp(min(max(mark, -200.0), 200.0)) for mark in marks]


def _log_spaced(low: float, high: float, step: float) -> Reals:
    if not 0 < low <= high < math.inf:
        raise OverflowError("frequencies leave the range of float64")
    count = max(2, math.ceil(math.log(high / low) / step) + 1)
    return np.asarray(low * np.exp(np.arange(count) * (math.log(high / low) / (count - 1))))


def _near_root(root: complex) -> Reals:
    """Frequencies about a light resonance, spaced by the distance to it."""
    width, centre = abs(root.real), root.imag
    if width < 1e-9 * centre:
        offsets = centre * np.exp(-np.arange(0.5, 26.0, 2 * FINE_STEP))
    else:
        offsets = width * np.sinh(np.arange(0.0, math.asinh(0.7 * centre / width) + FINE_STEP, FINE_STEP))
    both: Reals = np.concatenate([centre - offsets, centre + offsets])
    return both[both > 0]
