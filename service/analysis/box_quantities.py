"""What is worst over the box: the value that members have at a point (w, v), and the sector that −1 stays out
of as long as no member has a lower one (`box_sectors`).

    distance        min abs 1 + L; its inverse is the worst maximum sensitivity
    gain margin     −x − ln k_high where the phase reaches −180° and abs L < 1
    phase margin    the angle from the rectangle to the nearest multiple where abs L = 1 for some k
    delay margin    the angle below the rectangle over ω where abs L = 1 for some k
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from service.analysis.box import TURN, Bounds, UncertainLoop
from service.analysis.box_cells import Rectangles
from service.analysis.box_search import Found
from service.analysis.box_sectors import Flags, Sector
from service.analysis.loop import Reals

DISTANCE_SLACK = 0.008
"""Relative width of the bracket of the maximum sensitivity."""

MARGIN_SLACK = 5e-7
"""How far below the worst member's margin the reported one may lie, relatively."""

NEWTON_STEPS = 4

EDGES = np.array([-1.0, 1.0])
DISTANCE_SHARES = np.array([-0.8, -0.4, 0.0, 0.4, 0.8])

NEARLY = 1e-10
"""A constraint that is missed by no more than this (nepers, rad) is met."""


@dataclass(frozen=True, eq=False)
class Distance:
    """The distance of L from −1."""

    bounds: Bounds
    share: float = DISTANCE_SLACK

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return self.share * attained

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """A disc about −1."""
        return _of_box(self.bounds, omega)._replace(distance=level)

    def attain(self, loop: UncertainLoop, places: Rectangles) -> Found:
        """The least distance at points of the cells."""
        w, v = spread_out(places, DISTANCE_SHARES, EDGES)
        return least(self.values(*loop.at(w, v)[:2], np.exp(w - v), v), w, v)

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """The distance at points."""
        low_k, high_k = self.bounds.log_gain
        low = y - omega * self.bounds.dead_time[1]
        high = y - omega * self.bounds.dead_time[0]
        inside = np.floor(high / TURN) > np.floor(low / TURN)
        cosine = np.where(inside, 1.0, np.maximum(np.cos(low), np.cos(high)))
        magnitude = np.minimum(np.maximum(cosine, np.exp(x + low_k)), np.exp(x + high_k))
        # |1 − M·e^(jy)|² without the loss of digits where both are near 1
        squared = (1.0 - magnitude) ** 2 + 2.0 * magnitude * (1.0 - cosine)
        distance = np.sqrt(squared) * (1.0 + 1e-12)
        # cells may reach beyond the box
        low_v, high_v = self.bounds.log_time
        return np.where((low_v <= v) & (v <= high_v), distance, np.inf)


def _of_box(bounds: Bounds, omega: tuple[float, float]) -> Sector:
    return Sector(bounds.log_gain, bounds.dead_time, bounds.log_time, omega)


def spread_out(places: Rectangles, shares_w: Reals, shares_v: Reals) -> tuple[Reals, Reals]:
    """Points of cells, (w, v) each of shape (q·shares,); shares of the half widths."""
    shape = (len(shares_w), len(shares_v), len(places.low_w))
    middle_w, middle_v = places.centre
    w = middle_w + shares_w[:, None, None] * (places.high_w - middle_w)
    # an edge of the box to the last digit
    v = np.clip(middle_v + shares_v[:, None] * (places.high_v - middle_v), places.low_v, places.high_v)
    every = np.zeros(shape)
    return (w + every).ravel(), (v + every).ravel()


def least(values: Reals, w: Reals, v: Reals) -> Found:
    """The least of values met at points, all of one shape; nan counts for nothing."""
    index = int(np.argmin(np.where(values == values, values, np.inf)))
    return Found(float(values.flat[index]), (float(w.flat[index]), float(v.flat[index])))


def crossings(
    loop: UncertainLoop, w: Reals, v: Reals, of_gain: Flags, known: Reals, reach: Reals
) -> tuple[Reals, Reals, Reals]:
    """(w, x, y) of crossings near (w, v), v held: abs L = 1 for ln k = `known` where `of_gain`, else the
    phase at −180° for a dead time of `known`. Newton's method, by no more than `reach`; all of one shape
    (q,).
    """
    low, high = w - reach, w + reach
    for _ in range(NEWTON_STEPS):
        there, turned = loop.at(w, v), np.exp(w - v) * known
        phase = there.y - turned
        missed = np.where(of_gain, there.x + known, phase - TURN * np.rint(phase / TURN))
        moved = w - missed / np.where(of_gain, there.x_w, there.y_w - turned)
        w = np.minimum(np.maximum(np.where(moved == moved, moved, w), low), high)
    there = loop.at(w, v)
    return w, there.x, there.y


@dataclass(frozen=True, eq=False)
class Margin(ABC):
    """What margins have in common: a value that exists where L crosses."""

    bounds: Bounds

    of_gain: ClassVar[bool]
    """Whether the crossing is one of abs L through 1 (of the phase through −180°)."""

    def slack(self, attained: float) -> float:
        """A share of the value."""
        return MARGIN_SLACK * attained

    @property
    def known(self) -> tuple[float, float]:
        """The ends of what the crossing depends on beside w and v: ln k, or the dead time."""
        return self.bounds.log_gain if self.of_gain else self.bounds.dead_time

    @abstractmethod
    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """What −1 stays out of while no member has a margin below the level."""

    @abstractmethod
    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """See `box_search.Quantity`."""

    def attain(self, loop: UncertainLoop, places: Rectangles) -> Found:
        """The least value at the cells' centres and at crossings near them, for v at the cells' edges."""
        shape = (2, 2, len(places.low_w))
        middle, reach = places.centre[0], 1.5 * (places.high_w - places.low_w)
        every = np.zeros(shape)
        w, reach = (middle + every).ravel(), (reach + every).ravel()
        v = (np.array([places.low_v, places.high_v]) + every).ravel()
        known = (np.array(self.known)[:, None, None] + every).ravel()
        best = least(self.values(*loop.at(w, v)[:2], np.exp(w - v), v), w, v)
        w, x, y = crossings(loop, w, v, np.full(w.shape, self.of_gain), known, reach)
        return min(best, least(self.values(x, y, np.exp(w - v), v), w, v), key=lambda found: found.value)

    def _crossed(self, x: Reals, near: float) -> Flags:
        low, high = self.bounds.log_gain
        return np.asarray((x + high >= -near) & (x + low <= near))


class GainMargin(Margin):
    """ln of the worst gain margin, over members that are all stable."""

    of_gain = False

    def slack(self, attained: float) -> float:
        """The logarithm's is the gain margin's relative one."""
        return MARGIN_SLACK

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """So much more gain."""
        low, high = self.bounds.log_gain
        return _of_box(self.bounds, omega)._replace(log_gain=(low, high + level))

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """Where the phase reaches −180° for some dead time and abs L < 1."""
        low = y - omega * self.bounds.dead_time[1] - near
        high = y - omega * self.bounds.dead_time[0] + near
        reached = np.floor(high / TURN) >= np.ceil(low / TURN)
        log = x + self.bounds.log_gain[1]
        return np.where(reached & (log < 0), -log, np.inf)


class PhaseMargin(Margin):
    """The worst phase margin in rad, over members that are all stable."""

    of_gain = True

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """So much longer at either end."""
        return _of_box(self.bounds, omega)._replace(angle=level)

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """The angle to the nearest multiple, where abs L = 1 for some k."""
        low = y - omega * self.bounds.dead_time[1]
        high = y - omega * self.bounds.dead_time[0]
        return np.where(self._crossed(x, near), np.minimum(low % TURN, -high % TURN), np.inf)


class DelayMargin(Margin):
    """The worst delay margin in the loop's own unit of time, over members that are all stable."""

    of_gain = True

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """So much more dead time."""
        low, high = self.bounds.dead_time
        return _of_box(self.bounds, omega)._replace(dead_time=(low, high + level))

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = NEARLY) -> Reals:
        """The angle below the rectangle over ω, where abs L = 1 for some k."""
        angle = (y - omega * self.bounds.dead_time[1]) % TURN
        return np.where(self._crossed(x, near), angle / omega, np.inf)
