"""Enclosures of L over cells of (w, v), about a point of each cell that may be chosen.

Each factor ln(jω − r) is its value and slope at the point and a remainder by Taylor:
d²/d(ln ω)² ln(jω − r) = −r·jω/(jω − r)², whose magnitude over the cell follows from the least distance to r.
A cell that is enclosed about one of its corners is known best there: what rises from that corner is bounded
by its value at it. All enclosures are widened by what rounding may do.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from service.analysis.box import Response, UncertainLoop
from service.analysis.loop import EPSILON, Reals

ROUNDING_FACTOR = 64.0
"""How many times the rounding of one term an enclosure is widened by."""

CRUDE = 0.3
"""Above this remainder (nepers) the magnitude is enclosed factor by factor as well."""

BLOCK = 4096
"""So many cells are enclosed at once: each takes a dozen numbers a factor meanwhile."""

Indices = npt.NDArray[np.intp]


class Rectangles(NamedTuple):
    """Where cells lie; all shape (q,)."""

    low_w: Reals
    high_w: Reals
    low_v: Reals
    high_v: Reals

    def only(self, chosen: Indices | slice) -> Rectangles:
        """Some of them."""
        return Rectangles(*(part[chosen] for part in self))

    @property
    def centre(self) -> tuple[Reals, Reals]:
        """(w, v) of the centres."""
        return 0.5 * (self.low_w + self.high_w), 0.5 * (self.low_v + self.high_v)


@dataclass(frozen=True, eq=False)
class Cells:
    """Cells of (w, v) and Taylor enclosures of ln(−L) = x + jy, k = 1 and no dead time, over each; all shape
    (q,).

    `response` at the point (w, v) of each cell. With steps dw, dv from there ln(−L) is what its slopes say
    and a remainder of at most bend_plant·dw² + bend_rest·(dw − dv)² + rounding. `crude_low` and `crude_high`
    bound x where that is too coarse, else −inf and inf.
    """

    places: Rectangles
    response: Response
    w: Reals
    v: Reals
    omega: Reals
    bend_plant: Reals
    bend_rest: Reals
    rounding: Reals
    crude_low: Reals
    crude_high: Reals

    def __len__(self) -> int:
        return len(self.w)

    def only(self, chosen: Indices | slice) -> Cells:
        """Some of them."""
        response = Response(*(part[chosen] for part in self.response))
        parts = (getattr(self, each.name)[chosen] for each in fields(self)[2:])
        return Cells(self.places.only(chosen), response, *parts)

    @cached_property
    def steps(self) -> tuple[Reals, Reals]:
        """(dw, dv) of the cell's four corners from its point, (4, q) each."""
        place = self.places
        left, right = place.low_w - self.w, place.high_w - self.w
        down, up = place.low_v - self.v, place.high_v - self.v
        return np.array([left, left, right, right]), np.array([down, up, down, up])

    @cached_property
    def step_to_middle(self) -> tuple[Reals, Reals]:
        """(dw, dv) of the cell's middle from its point."""
        middle_w, middle_v = self.places.centre
        return middle_w - self.w, middle_v - self.v

    @property
    def at_middle(self) -> tuple[Reals, Reals, Reals, Reals]:
        """(x, y, ω, v) at the cell's middle, by its tangent."""
        step_w, step_v = self.step_to_middle
        x, y, x_w, y_w, x_v, y_v = self.response
        omega = self.omega * np.exp(step_w - step_v)
        return x + x_w * step_w + x_v * step_v, y + y_w * step_w + y_v * step_v, omega, self.v + step_v

    @cached_property
    def widest_u(self) -> Reals:
        """How far ln ω may be from that at the point."""
        step_w, step_v = self.steps
        return np.asarray(np.abs(step_w - step_v).max(0))

    @cached_property
    def log_magnitude(self) -> tuple[Reals, Reals]:
        """Bounds of ln abs L for k = 1."""
        step_w, step_v = self.steps
        linear = self.response.x_w * step_w + self.response.x_v * step_v
        bent = self.bend_plant * step_w * step_w + self.bend_rest * (step_w - step_v) ** 2
        # concave less, convex more: both are extreme at a corner
        low = self.response.x + (linear - bent).min(0) - self.rounding
        high = self.response.x + (linear + bent).max(0) + self.rounding
        return np.fmax(low, self.crude_low), np.fmin(high, self.crude_high)


def enclose(loop: UncertainLoop, places: Rectangles, w: Reals, v: Reals) -> Cells:
    """Enclosures over cells about points (w, v) in them, all shape (q,)."""
    if len(w) > BLOCK:
        blocks = [slice(start, start + BLOCK) for start in range(0, len(w), BLOCK)]
        return _joined([_enclose(loop, places.only(block), w[block], v[block]) for block in blocks])
    return _enclose(loop, places, w, v)


def _joined(parts: list[Cells]) -> Cells:
    places = Rectangles(*map(np.concatenate, zip(*(part.places for part in parts), strict=True)))
    response = Response(*map(np.concatenate, zip(*(part.response for part in parts), strict=True)))
    others = [np.concatenate([getattr(part, each.name) for part in parts]) for each in fields(Cells)[2:]]
    return Cells(places, response, *others)


def _enclose(loop: UncertainLoop, places: Rectangles, w: Reals, v: Reals) -> Cells:
    factors = loop.factors(w, v)
    falls, rises = places.low_w - w, places.high_w - w
    falls_u, rises_u = falls - (places.high_v - v), rises - (places.low_v - v)
    # ω at the root's own place: that of w for the plant's factors, of u = w − v for the others
    low = factors.omega * np.exp(np.where(loop.of_plant, falls[:, None], falls_u[:, None]))
    high = factors.omega * np.exp(np.where(loop.of_plant, rises[:, None], rises_u[:, None]))
    b = loop.roots.imag
    gap = np.maximum(np.maximum(low - b, b - high), 0.0)
    nearest = gap * gap + loop.real_squared
    bend = loop.sizes * high / np.maximum(nearest, 1e-300)
    bends = 0.5 * (bend @ np.abs(loop.split_weights))
    bend_plant, bend_rest = bends[:, 0], bends[:, 1]
    # an error of w or v by its last digit moves each factor by so much
    steep = (factors.omega / np.sqrt(factors.square)).sum(1)
    terms = 8.0 + len(loop.roots) + abs(loop.log_gain) + steep * (1.0 + np.abs(w) + np.abs(v))
    widest, widest_u = np.maximum(-falls, rises), np.maximum(-falls_u, rises_u)
    remainder = bend_plant * widest * widest + bend_rest * widest_u * widest_u
    return Cells(
        places,
        loop.combined(factors),
        w,
        v,
        np.exp(w - v),
        bend_plant,
        bend_rest,
        ROUNDING_FACTOR * EPSILON * terms,
        *_crude(loop, remainder, low, high, nearest),
    )


def _crude(
    loop: UncertainLoop, remainder: Reals, low: Reals, high: Reals, nearest: Reals
) -> tuple[Reals, Reals]:
    """Bounds of ln abs L factor by factor where the remainder is large, else −inf and inf; (q,) each."""
    lowest, highest = np.full(len(remainder), -np.inf), np.full(len(remainder), np.inf)
    chosen = np.flatnonzero(~(remainder <= CRUDE))
    if not chosen.size:
        return lowest, highest
    b = loop.roots.imag
    farthest = np.maximum(np.abs(low[chosen] - b), np.abs(high[chosen] - b))
    near = 0.5 * np.log(nearest[chosen])
    far = 0.5 * np.log(farthest * farthest + loop.real_squared)
    above, below = np.where(loop.weights > 0, far, -near), np.where(loop.weights > 0, near, -far)
    lowest[chosen] = below.sum(1) + loop.log_gain - 1e-9
    highest[chosen] = above.sum(1) + loop.log_gain + 1e-9
    # a pole and a zero on the axis in one cell make nan: nothing is known
    return np.where(lowest == lowest, lowest, -np.inf), np.where(highest == highest, highest, np.inf)
