"""What is worst over the box, each as something to minimise over (w, v): exact at a point, bounded over a
cell.

With gain and dead time free, ln(−L) = x + jy sweeps the rectangle x ∈ X + [ln k], y ∈ Y − ω·[θ], and −1 lies
at the multiples of 2πj. Minimised are
    distance        min abs 1 + L; its inverse is the worst maximum sensitivity
    gain margin     −x − ln k_high where the phase reaches −180° and abs L < 1
    phase margin    the angle from the rectangle to the nearest multiple where abs L = 1 for some k
    delay margin    the angle below the rectangle over ω where abs L = 1 for some k
A constraint g ≥ 0 enters a bound as f − λ·g with the λ ≥ 0 that takes the slope by w away, so that bounds are
of second order in a cell's width there too (weak duality: any λ ≥ 0 gives a bound).

The distance: {z: abs(1 − e^z) < d} is convex for d < 1 (ln(1 + u) is a convex function of the unit disc), so
the half-plane that touches it at the nearest point of the centre's rectangle keeps the whole cell away from
it, less what the cell's width carries across.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.box import TURN, Bounds, Cells, Combination, Corners, UncertainLoop
from service.analysis.box_search import Found
from service.analysis.loop import Complexes, Reals

DISTANCE_SLACK = 0.008
"""Relative width of the bracket of the maximum sensitivity."""

MARGIN_SLACK = 5e-7
"""How far below the worst member's margin the reported one may lie, relatively."""

NEARLY_ONE = 0.997
"""A distance so near to 1 is as good as 1; the slack is wider."""

NEWTON_STEPS = 3

EDGES = np.array([-1.0, 1.0])
DISTANCE_SHARES = np.array([-0.8, -0.4, 0.0, 0.4, 0.8])

NEARLY = 1e-10
"""A constraint that is missed by no more than this (nepers, rad) is met."""

Flags = npt.NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Distance:
    """The distance of L from −1."""

    bounds: Bounds
    share: float = DISTANCE_SLACK

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return self.share * attained

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """Bounds over cells."""
        low_x, high_x = cells.log_magnitude
        low_x, high_x = low_x + self.bounds.log_gain[0], high_x + self.bounds.log_gain[1]
        by_magnitude = np.maximum(np.maximum(np.expm1(low_x), -np.expm1(high_x)), 0.0)
        angle, inside = self._angles(cells.value.imag, cells.omega)
        cosine, sine = np.cos(angle), np.sin(angle)
        magnitude = self._nearest_magnitude(cells.value.real, cosine)
        distance = np.hypot(magnitude - cosine, sine)
        # low and high side of the rectangle: y is counted upwards from the multiple below, or downwards from
        # the one above
        upwards = np.array([[1.0], [-1.0]])
        dead_time = np.array([[self.bounds.dead_time[1]], [self.bounds.dead_time[0]]])
        of_log = magnitude * (magnitude - cosine) / distance
        of_phase = upwards * magnitude * sine / distance
        outward = cells.combination(of_log, of_phase, -of_phase * dead_time)
        turn = cells.combination(np.zeros_like(angle), upwards + 0.0 * angle, -upwards * dead_time)
        crossed = outward.spread / magnitude
        touching = distance - (1.0 + distance) * crossed
        plain = distance - (1.0 + distance) * np.expm1(self._widest(cells, dead_time))
        bound = np.where(distance < 1.0, np.maximum(touching, plain), plain)
        # farther from −1 than 1 the set is not convex: the one of NEARLY_ONE is, and its half-plane in that
        # direction is known
        direction = np.arctan2(upwards * of_phase, of_log)
        reach = np.cos(direction) * np.log(magnitude) + np.sin(direction) * angle
        beyond = reach - crossed >= _support(direction)
        bound = np.where((distance >= NEARLY_ONE) & beyond, np.maximum(bound, NEARLY_ONE), bound)
        bound = np.where(angle - turn.spread >= 0.5 * math.pi, np.maximum(bound, 1.0), bound)
        # a rectangle that turns by more could come to another multiple
        bound = np.where(turn.spread < 0.5 * math.pi, bound, -np.inf).min(0)
        bound = np.maximum(by_magnitude, np.where(inside, -np.inf, bound))
        cost_w, cost_v = cells.curvature(self.bounds.dead_time[1])
        turned = cells.omega * self.bounds.dead_time[1]
        # the convex set bends away from the half-plane that touches it
        cost_w = cost_w + (np.abs(cells.slope_w - 1j * turned) * cells.half_w) ** 2
        cost_v = cost_v + (np.abs(cells.slope_v + 1j * turned) * cells.half_v) ** 2
        # where the rectangle holds a multiple, the distance at the centre is not that of its corner
        return bound, cost_w, cost_v, np.where(inside, np.inf, distance.min(0)) * (1.0 + 1e-12)

    def _widest(self, cells: Cells, dead_time: Reals) -> Reals:
        """How far ln(−L) may move in a cell, (2, q)."""
        of_w = np.abs(cells.slope_w - 1j * cells.omega * dead_time) * cells.half_w
        of_v = np.abs(cells.slope_v + 1j * cells.omega * dead_time) * cells.half_v
        return of_w + of_v + cells.remainder + dead_time * cells.omega_remainder

    def _angles(self, phase: Reals, omega: Reals) -> tuple[Reals, Flags]:
        """Angles from the rectangle to the multiples below and above it, at most π, (2, q); and whether it
        holds one.
        """
        low, high = phase - omega * self.bounds.dead_time[1], phase - omega * self.bounds.dead_time[0]
        below, above = np.floor(low / TURN), np.floor(high / TURN)
        angle = np.stack([low - TURN * below, TURN * (above + 1.0) - high])
        return np.minimum(angle, math.pi), above > below

    def _nearest_magnitude(self, x: Reals, cosine: Reals) -> Reals:
        low, high = self.bounds.log_gain
        return np.clip(cosine, np.exp(x + low), np.exp(x + high))

    def attain(self, loop: UncertainLoop, corners: Corners) -> Found:
        """The least distance at points of the cells."""
        w, v = spread_out(corners, DISTANCE_SHARES, EDGES)
        value, omega = loop.at(w, v)[0], np.exp(w - v)
        angle, inside = self._angles(value.imag, omega)
        cosine = np.cos(np.where(inside, 0.0, angle))
        magnitude = self._nearest_magnitude(value.real, cosine)
        distance = np.hypot(magnitude - cosine, np.sin(np.where(inside, 0.0, angle))).min(0)
        return least(distance * (1.0 + 1e-12), w, v)


def spread_out(corners: Corners, shares_w: Reals, shares_v: Reals) -> tuple[Reals, Reals]:
    """Points of cells, (w, v) each of shape (q·shares,); shares of the half widths."""
    shape = (len(shares_w), len(shares_v), len(corners.w))
    w = corners.w + shares_w[:, None, None] * corners.half_w
    v = corners.v + shares_v[:, None] * corners.half_v
    return np.broadcast_to(w, shape).ravel(), np.broadcast_to(v, shape).ravel()


def least(values: Reals, w: Reals, v: Reals) -> Found:
    """The least of values met at points, all of one shape."""
    index = int(np.argmin(values))
    return Found(float(values.flat[index]), (float(w.flat[index]), float(v.flat[index])))


def _support(direction: Reals) -> Reals:
    """How far {z: abs(1 − e^z) ≤ NEARLY_ONE} reaches in a direction (an angle), shape of it."""
    # the point of the circle whose image has its normal there, by the law of sines
    turned = np.arcsin(NEARLY_ONE * np.sin(direction))
    point = 1.0 + NEARLY_ONE * np.exp(1j * (direction + turned))
    return np.asarray(np.cos(direction) * np.log(np.abs(point)) + np.sin(direction) * turned)


def error_scale(loop: UncertainLoop, log_gain: Reals, log_time: Reals, dead_time: Reals) -> Reals:
    """The least r for which members with these factors lie in the box of scale r, shape of all."""
    more = dead_time - loop.dead_times.nominal
    scale = np.where(
        more >= 0,
        loop.dead_times.scale_above(np.maximum(more, 0.0)),
        loop.dead_times.scale_below(np.maximum(-more, 0.0)),
    )
    scale = np.maximum(scale, scale_of(log_gain, loop.log_gain_factor))
    return np.maximum(scale, scale_of(log_time, loop.log_time_factor))


def scale_of(log: Reals, logs: tuple[float, float]) -> Reals:
    """The least r for which `log` lies in r·`logs`; inf: for none."""
    low, high = logs
    above = log / high if high > 0 else np.where(log > 0, np.inf, 0.0)
    below = log / low if low < 0 else np.where(log < 0, np.inf, 0.0)
    return np.maximum(np.maximum(above, below), 0.0)


class Linear(NamedTuple):
    """of_log·ln abs L + of_phase·arg(−L) + of_omega·ω + constant, for k = 1 and no dead time; (q,) each."""

    of_log: Reals
    of_phase: Reals
    of_omega: Reals
    constant: Reals

    def less(self, factor: Reals, other: Linear) -> Linear:
        """This less a multiple of another."""
        return Linear(*(mine - factor * its for mine, its in zip(self, other, strict=True)))

    def slope(self, cells: Cells) -> Reals:
        """The slope by w at the centres."""
        by_log, by_phase = cells.slope_w.real, cells.slope_w.imag
        return np.asarray(self.of_log * by_log + self.of_phase * by_phase + self.of_omega * cells.omega)


@dataclass(frozen=True, eq=False)
class _OverCrossings(ABC):
    """What margins have in common: a value that exists where two constraints hold."""

    bounds: Bounds
    loop: UncertainLoop

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return MARGIN_SLACK * attained

    def _constraints(self, cells: Cells) -> tuple[Linear, Linear]:
        """abs L = 1 for some k: it is at least 1 for the highest and at most 1 for the lowest."""
        one, none = np.ones(len(cells)), np.zeros(len(cells))
        low, high = self.bounds.log_gain
        return Linear(one, none, none, high * one), Linear(-one, none, none, -low * one)

    def _crossed(self, cells: Cells) -> Flags:
        """Whether abs L may be 1 for some k in each cell."""
        low_x, high_x = cells.log_magnitude
        low, high = self.bounds.log_gain
        return np.asarray(~(high_x + high < 0) & ~(low_x + low > 0))

    @abstractmethod
    def _values(self, logs: Complexes, omega: Reals) -> Reals:
        """The value at points, inf where the constraints do not hold; `logs`: ln(−L) without dead time."""

    def _solved(self, logs: Complexes, slopes: Complexes, omega: Reals) -> tuple[Reals, Reals]:
        """(What is 0 where one or other constraint is just met, its slope by w), (2, …)."""
        low, high = self.bounds.log_gain
        return np.stack([logs.real[0] + high, logs.real[1] + low]), slopes.real

    def attain(self, loop: UncertainLoop, corners: Corners) -> Found:
        """The least value at the centres and where a constraint is just met, for v at the cells' edges."""
        shape = (2, 2, len(corners.w))
        v = np.broadcast_to(corners.v + EDGES[:, None] * corners.half_v, shape)
        low, high = corners.w - 3.0 * corners.half_w, corners.w + 3.0 * corners.half_w
        w, best = np.broadcast_to(corners.w, shape), Found(math.inf)
        for step in range(NEWTON_STEPS + 1):
            logs, slopes, _ = (part.reshape(shape) for part in loop.at(w.ravel(), v.ravel()))
            omega = np.exp(w - v)
            if step in (0, NEWTON_STEPS):
                best = min(best, least(self._values(logs, omega), w, v), key=lambda found: found.value)
            residual, slope = self._solved(logs, slopes, omega)
            moved = w - residual / slope
            w = np.clip(np.where(moved == moved, moved, w), low, high)
        return best

    def _dual(self, cells: Cells, aim: Linear) -> tuple[Combination, Reals]:
        """(The aim and the aim less either constraint, (3, q); the best of their lower bounds, (q,))."""
        slope = aim.slope(cells)
        functions = [aim]
        for constraint in self._constraints(cells):
            multiplier = slope / constraint.slope(cells)
            multiplier = np.where((multiplier > 0) & (multiplier < np.inf), multiplier, 0.0)
            functions.append(aim.less(multiplier, constraint))
        combination = cells.combination(*(np.stack(part) for part in zip(*functions, strict=True)))
        return combination, np.fmax.reduce(combination.lowest, axis=0)


@dataclass(frozen=True, eq=False)
class GainMargin(_OverCrossings):
    """ln of the worst gain margin, over members that are all stable and no nearer to −1 than `distance`."""

    distance: float

    def slack(self, attained: float) -> float:
        """The logarithm's is the gain margin's relative one."""
        return MARGIN_SLACK

    def _multiple(self, cells: Cells) -> tuple[Reals, Flags, Flags]:
        """(A multiple of 2π that the phase may reach in the cell, if there is one, if it is alone)."""
        lowest, highest = cells.phase(self.bounds.dead_time[1])[0], cells.phase(self.bounds.dead_time[0])[1]
        multiple = np.ceil(lowest / TURN)
        reached = ~(TURN * multiple > highest)
        return multiple, reached, TURN * (multiple + 1.0) > highest

    def _constraints(self, cells: Cells) -> tuple[Linear, Linear]:
        one, none = np.ones(len(cells)), np.zeros(len(cells))
        low, high = self.bounds.dead_time
        turned = TURN * self._multiple(cells)[0]
        return Linear(none, one, -low * one, -turned), Linear(none, -one, high * one, turned)

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """Bounds over cells."""
        one, none = np.ones(len(cells)), np.zeros(len(cells))
        _, reached, alone = self._multiple(cells)
        combination, best = self._dual(cells, Linear(-one, none, none, -self.bounds.log_gain[1] * one))
        low_x, high_x = cells.log_magnitude
        plain = np.fmax(combination.lowest[0], -high_x - self.bounds.log_gain[1])
        best = np.where(alone, np.fmax(best, plain), plain)
        # where the phase reaches −180°, abs L keeps its distance from 1: so much below is below for good
        above = low_x + self.bounds.log_gain[1] > math.log1p(-min(self.distance, 1.0 - 1e-9))
        return np.where(reached & ~above, best, np.inf), *cells.curvature(self.bounds.dead_time[1]), None

    def _solved(self, logs: Complexes, slopes: Complexes, omega: Reals) -> tuple[Reals, Reals]:
        low, high = self.bounds.dead_time
        dead_time = np.array([low, high])[:, None, None]
        phase = logs.imag - omega * dead_time
        return phase - TURN * np.rint(phase / TURN), slopes.imag - omega * dead_time

    def _values(self, logs: Complexes, omega: Reals) -> Reals:
        low = logs.imag - omega * self.bounds.dead_time[1] - NEARLY
        high = logs.imag - omega * self.bounds.dead_time[0] + NEARLY
        reached = np.floor(high / TURN) >= np.ceil(low / TURN)
        x = logs.real + self.bounds.log_gain[1]
        return np.where(reached & (x < 0), -x, np.inf)


@dataclass(frozen=True, eq=False)
class PhaseMargin(_OverCrossings):
    """The worst phase margin in rad, over members that are all stable."""

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """Bounds over cells."""
        one, none = np.ones(len(cells)), np.zeros(len(cells))
        low, high = self.bounds.dead_time
        below = np.floor((cells.value.imag - cells.omega * high) / TURN)
        above = np.floor((cells.value.imag - cells.omega * low) / TURN) + 1.0
        aims = (
            Linear(none, one, -high * one, -TURN * below),
            Linear(none, -one, low * one, TURN * above),
        )
        bound = np.full(len(cells), np.inf)
        for aim in aims:
            combination, best = self._dual(cells, aim)
            # past a whole turn the nearest multiple is another one
            bound = np.minimum(bound, np.where(combination.highest[0] < TURN, best, -np.inf))
        return np.where(self._crossed(cells), bound, np.inf), *cells.curvature(high), None

    def _values(self, logs: Complexes, omega: Reals) -> Reals:
        low = logs.imag - omega * self.bounds.dead_time[1]
        high = logs.imag - omega * self.bounds.dead_time[0]
        nearest = np.minimum(low % TURN, -high % TURN)
        return np.where(_met(logs, self.bounds), nearest, np.inf)


@dataclass(frozen=True, eq=False)
class DelayMargin(_OverCrossings):
    """The worst delay margin in the loop's own unit of time, over members that are all stable."""

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """Bounds over cells."""
        one, none = np.ones(len(cells)), np.zeros(len(cells))
        high = self.bounds.dead_time[1]
        below = TURN * np.floor((cells.value.imag - cells.omega * high) / TURN)
        highest = cells.phase(high)[1] - below
        known = attained if math.isfinite(attained) else 0.0
        _, best = self._dual(cells, Linear(none, one, -(high + known) * one, -below))
        # the angle that is missing at ω costs so much time, that which is to spare is worth so much
        bound = known + np.where(best < 0, best / cells.omega_lowest, best / cells.omega_highest)
        bound = np.where(highest < TURN, bound, -np.inf)
        return np.where(self._crossed(cells), bound, np.inf), *cells.curvature(high + known), None

    def _values(self, logs: Complexes, omega: Reals) -> Reals:
        angle = (logs.imag - omega * self.bounds.dead_time[1]) % TURN
        return np.where(_met(logs, self.bounds), angle / omega, np.inf)


def _met(logs: Complexes, bounds: Bounds) -> Flags:
    low, high = bounds.log_gain
    return np.asarray((logs.real + high >= -NEARLY) & (logs.real + low <= NEARLY))
