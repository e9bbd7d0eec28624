"""L(jω) on the positive axis: its continuous phase, where it turns, and every crossover.

The magnitude does not depend on dead time and the phase is a sum of arctangents less ωθ, so both are known
without unwrapping. The grid is fine relative to the distance from jω to the nearest zero or pole; between two
of its points magnitude and phase turn at most once, and each is split there, so that a crossover is bracketed
on a monotone piece and the list is complete.
"""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.brackets import newton_zero_of_one, zeros_in_steps
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
        crossed = changes(values > 0)
        low, high, at_low, at_high = omega[crossed], omega[crossed + 1], values[crossed], values[crossed + 1]
        # abs L is nearly a power of ω
        start = low * (high / low) ** (at_low / (at_low - at_high))
        brackets = zip(low.tolist(), high.tolist(), (at_low > 0).tolist(), start.tolist(), strict=True)
        told = self.loop.log_magnitude_at
        return np.array([newton_zero_of_one(told, *bracket) for bracket in brackets], np.float64)

    @cached_property
    def phase_crossovers(self) -> PhaseCrossings:
        """Where L is real and negative: the lowest of them, and those that bound the margins."""
        turns = self._turns(self.log_slope.imag, lambda omega: self.loop.phase_at(omega)[1])
        # abs L is monotone between these: the first and last crossing between two of them bound the rest
        marks = np.sort(np.concatenate([self._magnitude_turns, self.gain_crossovers]))
        inserted = np.sort(np.concatenate([turns, marks]))
        omega, logs = self._with_points(inserted)
        phase = logs.imag
        rounds = np.floor((phase + math.pi) / (2 * math.pi))
        # a phase that stands still at -180° is not crossed; only rounding moves it
        still = (np.abs(phase[1:] - phase[:-1]) <= 1e-12) & (omega[1:] - omega[:-1] > 1e-9 * omega[:-1])
        crossed = ((rounds[1:] != rounds[:-1]) & ~still).nonzero()[0]
        ends = [each[at] for each in (omega, logs, rounds) for at in (crossed, crossed + 1)]
        steps = [_Step(*each) for each in zip(*(end.tolist() for end in ends), strict=True)]
        chosen, truncated = _chosen_crossings(steps, marks.tolist())
        solved = np.array([self._phase_crossover(*each) for each in chosen], np.float64)
        return PhaseCrossings(solved, self.loop.log_response(solved).real, truncated)

    def _phase_crossover(self, step: _Step, within: int) -> float:
        """Where L is real and negative for the time `within` in the step."""
        falling = step.round_right < step.round_left
        turn = step.round_left - within if falling else step.round_left + 1 + within
        target = turn * (2 * math.pi) - math.pi

        def from_target(omega: float) -> tuple[float, float]:
            phase, slope = self.loop.phase_at(omega)
            return phase - target, slope

        share = (target - step.log_left.imag) / (step.log_right.imag - step.log_left.imag)
        start = step.left + min(max(share, 0.0), 1.0) * (step.right - step.left)
        # by the rounds, not by the phase at the low end: that is 0 where the crossing lies on it
        return newton_zero_of_one(from_target, step.left, step.right, falling, start)

    def _turns(self, slopes: Reals, slope_at: Callable[[float], float]) -> Reals:
        """Where a function of ω with these slopes on the grid turns, shape (t,)."""
        return zeros_in_steps(slope_at, self.omega, slopes, changes(slopes > 0), TURN_PLACE)

    def _with_points(self, more: Reals) -> tuple[Reals, Complexes]:
        """The grid and ln L on it with further frequencies put in."""
        if not more.size:
            return self.omega, self.log_response
        omega = np.concatenate([self.omega, more])
        order = omega.argsort(kind="stable")
        return omega[order], np.concatenate([self.log_response, self.loop.log_response(more)])[order]


@dataclass(frozen=True, eq=False)
class PhaseCrossings:
    """ω, increasing, and ln abs L there, shapes (m,); `truncated`: there are more, which bound no margin."""

    omega: Reals
    log_magnitude: Reals
    truncated: bool


class _Step(NamedTuple):
    """A step of the grid in which L is real and negative: ω and ln L at both ends, and how many whole turns
    the phase there lies above −180°.
    """

    left: float
    right: float
    log_left: complex
    log_right: complex
    round_left: float
    round_right: float

    @property
    def times(self) -> int:
        """How often L is real and negative in it."""
        return int(abs(self.round_right - self.round_left))


def _chosen_crossings(steps: list[_Step], marks: list[float]) -> tuple[list[tuple[_Step, int]], bool]:
    """Which crossings to solve for, each as its step and its number in it, and whether there are more to
    list.

    The lowest ones that can be listed, and the first and last of each stretch on which abs L is monotone,
    which `marks` part.
    """
    low, high = (math.log(1.0 / factor) for factor in reversed(LISTED_FACTORS))
    chosen: set[tuple[int, int]] = set()
    listed = 0
    for index, step in enumerate(steps):
        larger, smaller = (
            max(step.log_left.real, step.log_right.real),
            min(step.log_left.real, step.log_right.real),
        )
        if larger >= low and smaller <= high:
            wanted = min(step.times, MAX_LISTED + 1 - listed)
            chosen.update((index, number) for number in range(wanted))
            listed += wanted
        if listed > MAX_LISTED:
            break
    stretches = [bisect_left(marks, 0.5 * (step.left + step.right)) for step in steps]
    for index, stretch in enumerate(stretches):
        if index == 0 or stretch != stretches[index - 1]:
            chosen.add((index, 0))
        if index == len(steps) - 1 or stretch != stretches[index + 1]:
            chosen.add((index, steps[index].times - 1))
    return [(steps[index], number) for index, number in sorted(chosen)], listed > MAX_LISTED


def changes(told: npt.NDArray[np.bool_]) -> Indices:
    """The steps, by their left ends, in which what is told of each point of a grid changes."""
    steps: Indices = (told[1:] != told[:-1]).nonzero()[0]
    return steps


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
    first = np.ones(len(values), bool)
    np.greater(values[1:], values[:-1], out=first[1:])
    return np.asarray(values[first])


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
