"""Whether −1 stays out of a set: the one test that every proof over a box comes down to.

With gain and dead time free, ln(−L) = x + jy sweeps the rectangle x ∈ X + [ln k], y ∈ Y − ω·[θ] for one
(w, v), and −1 lies at the multiples of 2πj. No worst case needs more than a rectangle and a disc:
    stable for all        the box's rectangle holds no multiple
    sensitivity ≤ 1/d     nor any z with abs(1 − e^z) < d about one
    gain margin ≥ g       nor does the rectangle with ln g more of gain
    delay margin ≥ D      nor that with D more of dead time
    phase margin ≥ φ      nor that which is φ longer at either end
    tolerated scale ≥ r   nor that of the box of scale r
The sets {z: abs(1 − e^z) ≤ d} are convex for d < 1 (ln(1 + u) is a convex function of the unit disc), so that
a rectangle stays out of one if and only if a half-plane parts them. Any direction of it gives a proof over a
whole cell where the corner that faces −1 stays on its side; the directions tried are those that lose least.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.box import TURN
from service.analysis.box_cells import ROUNDING_FACTOR, Cells, Indices
from service.analysis.loop import EPSILON, Reals

UPWARDS = np.array([[1.0], [-1.0]])
"""The low side of a rectangle faces the multiple below it, the high side the one above."""

NEARLY_ONE = 0.997
"""Discs up to this distance are taken for convex ones; farther from −1 a cell is known by its width alone."""

BLOCK = 4096
"""So many cells are tested at once: their memory is several hundred numbers each."""

Flags = npt.NDArray[np.bool_]


class Sector(NamedTuple):
    """The set that −1 stays out of: ranges of ln k and of the dead time, what is added to the angle at either
    end, and the distance from −1; for the time factors and frequencies of its box.
    """

    log_gain: tuple[float, float]
    dead_time: tuple[float, float]
    log_time: tuple[float, float]
    omega: tuple[float, float]
    angle: float = 0.0
    distance: float = 0.0


class Sectors(NamedTuple):
    """Several of them in arrays of one shape."""

    log_gain_low: Reals
    log_gain_high: Reals
    dead_time_low: Reals
    dead_time_high: Reals
    log_time_low: Reals
    log_time_high: Reals
    log_omega_low: Reals
    log_omega_high: Reals
    angle: Reals
    distance: Reals

    @classmethod
    def of(cls, sectors: list[Sector]) -> Sectors:
        """An array of all, shape (t,) each."""
        rows = [
            (
                *each.log_gain,
                *each.dead_time,
                *each.log_time,
                math.log(each.omega[0]),
                math.log(each.omega[1]),
                each.angle,
                each.distance,
            )
            for each in sectors
        ]
        return cls(*np.array(rows).T)

    def only(self, chosen: Indices | slice) -> Sectors:
        """The sectors that are meant by an index each, shape of `chosen`."""
        return Sectors(*(part[chosen] for part in self))

    @property
    def columns(self) -> Sectors:
        """The same as columns, (t, 1), against rows of cells."""
        return Sectors(*(part[:, None] for part in self))


def excluded_at_sight(cells: Cells, sectors: Sectors) -> Flags:
    """Whether a cell lies outside of a sector's box and axis, or abs L alone keeps −1 out; they broadcast."""
    low_x, high_x = cells.log_magnitude
    place = cells.places
    outside = (place.low_v >= sectors.log_time_high) & (place.high_v > sectors.log_time_high)
    outside |= (place.high_v <= sectors.log_time_low) & (place.low_v < sectors.log_time_low)
    # ends of the axis are known by series
    outside |= place.low_w - place.high_v >= sectors.log_omega_high
    outside |= place.high_w - place.low_v <= sectors.log_omega_low
    by_magnitude = low_x + sectors.log_gain_low > np.log1p(sectors.distance)
    by_magnitude |= high_x + sectors.log_gain_high < np.log1p(-sectors.distance)
    return np.asarray(outside | by_magnitude)


def excluded(cells: Cells, sectors: Sectors, *, about_corners: bool) -> tuple[Flags, Flags]:
    """(Whether −1 stays out of the sector in all of the cell, whether it seems to lie in it at its point).

    A sector for each cell. Where the first is false nothing is known of the cell. `about_corners`: some of
    the cells are enclosed about a corner of theirs.
    """
    if len(cells) > BLOCK:
        blocks = [slice(start, start + BLOCK) for start in range(0, len(cells), BLOCK)]
        told = [
            excluded(cells.only(each), sectors.only(each), about_corners=about_corners) for each in blocks
        ]
        return np.concatenate([out for out, _ in told]), np.concatenate([inside for _, inside in told])
    facing = _Facing(cells, sectors)
    found = [facing.nearest(), facing.along_w()]
    found += [facing.rising()] if about_corners else []
    directions = np.concatenate(found)
    out, inside = facing.parted(*_unit(directions[:, 0], directions[:, 1]))
    if (sectors.distance > NEARLY_ONE).any():
        out = np.where(sectors.distance > NEARLY_ONE, facing.far_away(), out)
    return out, inside


class _Facing:
    """A sector's rectangle at the cells' points, seen from the multiple below and from the one above; (2, q).

    Seen from above, angles are counted downwards: y is the angle from the multiple to the rectangle.
    """

    def __init__(self, cells: Cells, sectors: Sectors) -> None:
        self.cells, self.distance = cells, sectors.distance
        self.low_x = cells.response.x + sectors.log_gain_low
        self.high_x = cells.response.x + sectors.log_gain_high
        self.turned = cells.omega * np.array([sectors.dead_time_high, sectors.dead_time_low])
        self.by_w = cells.response.x_w, UPWARDS * (cells.response.y_w - self.turned)
        self.by_v = cells.response.x_v, UPWARDS * (cells.response.y_v + self.turned)
        low, high = ends = cells.response.y - self.turned - UPWARDS * sectors.angle
        # which multiples the cell lies between is asked at its middle
        step_w, step_v = cells.step_to_middle
        low_there, high_there = ends + UPWARDS * (self.by_w[1] * step_w + self.by_v[1] * step_v)
        # one that the rectangle holds is faced at the nearer end: a slanted half-plane may part them there
        first = TURN * np.ceil(low_there / TURN)
        holds = (first <= high_there) & (first - low_there < high_there - first)
        below = np.where(holds, first, first - TURN)
        self.y = np.array([low - below, below + TURN - high])

    def nearest(self) -> Reals:
        """The direction from −1, or the disc about it, to the rectangle; (1, 2, 2, q): x and y, sides."""
        y = np.maximum(self.y, 0.0)
        x = np.where(self.low_x > 0, self.low_x, np.minimum(self.high_x, 0.0)) + 0.0 * y
        if not self.distance.any():
            return np.array([x, y])[None]
        cosine, sine = np.cos(y), np.sin(y)
        magnitude = np.minimum(np.maximum(cosine, np.exp(self.low_x)), np.exp(self.high_x))
        # the disc's own normal; beyond a quarter turn it ends
        beyond = y >= 0.5 * math.pi
        n_x = np.where(self.distance > 0, np.where(beyond, 0.0, magnitude - cosine), x)
        n_y = np.where(self.distance > 0, np.where(beyond, 1.0, sine), y)
        return np.array([n_x, n_y])[None]

    def along_w(self) -> Reals:
        """The direction in which nothing changes by w to first order; (1, 2, 2, q)."""
        x, y = self.by_w
        return np.array([-y * np.sign(x), np.abs(x) + 0.0 * y])[None]

    def rising(self) -> Reals:
        """Directions in which cells that are enclosed about a corner rise from it, if there are any.

        Shape (2, 2, 2, q). One with the rectangle to the right of −1 and one with it to the left: the middle
        of all such directions.
        """
        w, v, place = self.cells.w, self.cells.v, self.cells.places
        away_w = 1.0 * (w == place.low_w) - 1.0 * (w == place.high_w)
        away_v = 1.0 * (v == place.low_v) - 1.0 * (v == place.high_v)
        right = np.array([1.0, -1.0])[:, None, None]
        lowest, highest = 0.0 * right, 0.5 * math.pi + 0.0 * right
        for away, (x, y) in ((away_w, self.by_w), (away_v, self.by_v)):
            # no more than a quarter turn from where the corner moves; no width asks for nothing
            moves = np.arctan2(away * y, right * away * x)
            lowest = np.maximum(lowest, moves - 0.5 * math.pi)
            highest = np.minimum(highest, moves + 0.5 * math.pi)
        middle = 0.5 * (lowest + highest)
        return np.array([right * np.cos(middle), np.abs(np.sin(middle))]).swapaxes(0, 1)

    def parted(self, n_x: Reals, n_y: Reals) -> tuple[Flags, Flags]:
        """(Whether half-planes in some of these directions part −1 from all of the cell, whether none in the
        first direction parts it from the cell's point); directions (d, 2, q), answers (q,).
        """
        cells = self.cells
        at_point = n_x * np.where(n_x < 0, self.high_x, self.low_x) + n_y * self.y - self._reach(n_x, n_y)
        slope_w = n_x * self.by_w[0] + n_y * self.by_w[1]
        slope_v = n_x * self.by_v[0] + n_y * self.by_v[1]
        # dead time turns by more than its tangent: the low side loses by it, the high side gains
        turned = self.turned * np.exp(cells.widest_u) * np.array([[0.5], [0.0]])
        bend_rest = cells.bend_rest + n_y * turned
        step_w, step_v = (step[:, None, None, :] for step in cells.steps)
        least = slope_w * step_w + slope_v * step_v
        least = (least - cells.bend_plant * step_w * step_w - bend_rest * (step_w - step_v) ** 2).min(0)
        rounding = (1.0 + np.abs(cells.w) + np.abs(cells.v)) * self.turned[0] * ROUNDING_FACTOR * EPSILON
        out = at_point + least > rounding + cells.rounding
        return out.any(0).all(0), ~(at_point[0] > 0).all(0)

    def _reach(self, n_x: Reals, n_y: Reals) -> Reals:
        """How far the disc {z: abs(1 − e^z) ≤ d} reaches in a direction, shape of it."""
        if not self.distance.any():
            return 0.0 * n_x
        # the point of the circle whose image has its normal there, by the law of sines
        sine = self.distance * n_y
        cosine = np.sqrt(1.0 - sine * sine)
        square = 1.0 + 2.0 * self.distance * (n_x * cosine - n_y * sine) + self.distance**2
        return np.asarray(0.5 * n_x * np.log(square) + n_y * np.arcsin(sine))

    def far_away(self) -> Flags:
        """Whether all of the cell is farther from −1 than the sector's distance, wherever it moves; (q,)."""
        cells = self.cells
        step_w, step_v = (np.abs(step).max(0) for step in cells.steps)
        widest = np.hypot(*self.by_w) * step_w + np.hypot(*self.by_v) * step_v
        widest = widest + cells.bend_plant * step_w**2 + cells.rounding
        widest = widest + (cells.bend_rest + 0.5 * self.turned * np.exp(cells.widest_u)) * cells.widest_u**2
        y = np.clip(self.y, 0.0, math.pi)
        magnitude = np.clip(np.cos(y), np.exp(self.low_x), np.exp(self.high_x))
        at_point = np.where(self.y < 0, 0.0, np.hypot(magnitude - np.cos(y), np.sin(y)))
        least = at_point - (1.0 + at_point) * np.expm1(widest)
        return np.asarray((least > self.distance).all(0))


def _unit(x: Reals, y: Reals) -> tuple[Reals, Reals]:
    size = np.hypot(x, y)
    return np.asarray(x / size), np.asarray(y / size)
