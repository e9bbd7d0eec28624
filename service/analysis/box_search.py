"""Branch and bound over the cells of a box: the least values of several quantities, proven from below at
once.

Each quantity has a level, a little below the least value met so far, and a cell is done with when no member
in it has a lower one. Works in waves: all cells of a wave are tested at once, for all quantities; what is
left is divided. What comes out is a proof whether or not the value met is the least one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import numpy as np

from service.analysis.box import Bounds, UncertainLoop
from service.analysis.box_cells import Cells, Indices, Rectangles, enclose
from service.analysis.box_sectors import Flags, Sector, Sectors, excluded, excluded_at_sight
from service.analysis.loop import Reals

STEP = 0.2
"""Width of a first cell in ln ω where the loop has its dynamics."""

COARSE_STEP = 1.2
"""The same where L is nearly a power of ω."""

STEP_OF_TIME_FACTOR = 0.25
"""Width of a first cell in ln f."""

MAX_FACTORS = 1_500_000
"""Work bound of one quantity: cells times factors of the loop, some 0.25 s of processor time."""

MAX_CELLS = 50_000
"""Bound of a wave, which keeps its memory to some tens of MB; the search that has most of them ends."""

FACTORS_OF_A_CELL = 20
"""A cell itself costs as much as so many factors."""

CHILDREN, FEWEST_PARTS, MOST_PARTS = 300, 4, 36
"""Cells are divided into about so many at once, each into no fewer and no more parts than these."""

WAVE_THAT_TRIES = 2
"""From this wave on a lower value is looked for wherever a cell is left; before, where one is known to be."""

TRIED = 4
"""The most promising cells of a wave in which a lower value is looked for."""


class Found(NamedTuple):
    """A value and where it was met; inf and None: nowhere."""

    value: float
    place: tuple[float, float] | None = None


class Quantity(Protocol):
    """What is minimised over a box."""

    def sector(self, level: float, omega: tuple[float, float]) -> Sector:
        """What −1 stays out of where no member has a value below the level, between two frequencies."""

    def values(self, x: Reals, y: Reals, omega: Reals, v: Reals, near: float = ...) -> Reals:
        """The least value of members at points (w, v), inf where there is none; ln(−L) = x + jy for k = 1
        and no dead time. A condition for there to be one counts as met where it is missed by no more than
        `near`.
        """

    def attain(self, loop: UncertainLoop, places: Rectangles) -> Found:
        """The least value met in or beside some cells."""

    def slack(self, attained: float) -> float:
        """How far below a finite attained value the least one may stay unknown."""


@dataclass
class Search:
    """One quantity on its way: between which frequencies it is searched for, the least value met, what it is
    bounded by elsewhere, work done.

    `unstable_at`: a member with so low a value is not stable, and only the search that says so goes on where
    it is `of_any_box`: the others ask what holds for a box of stable members. `given_up`: nothing is proven,
    for that reason or past the bound on work.
    """

    quantity: Quantity
    omega: tuple[float, float]
    best: Found
    elsewhere: float = math.inf
    unstable_at: float = 0.0
    of_any_box: bool = False
    work: int = field(default=0, init=False)
    given_up: bool = field(default=False, init=False)

    @property
    def meets_unstable(self) -> bool:
        """An unstable member of the box as stated was met."""
        return self.best.value <= self.unstable_at

    @property
    def level(self) -> float:
        """What is proven once no cell is left."""
        best = self.best.value
        return best - self.quantity.slack(best) if math.isfinite(best) else math.inf

    @property
    def proven(self) -> float:
        """What the quantity is not below, over all of its box; 0 where that is not known."""
        return 0.0 if self.given_up else min(self.level, self.elsewhere)

    @property
    def sector(self) -> Sector:
        """What −1 stays out of."""
        return self.quantity.sector(self.level, self.omega)

    def improve(self, loop: UncertainLoop, cells: Cells) -> None:
        """Look for a lower value in the most promising of some cells, which may be none."""
        if not len(cells):
            return
        promise = self.quantity.values(*cells.at_middle, math.inf)
        places = cells.places.only(np.argsort(promise)[:TRIED])
        self.best = min(self.best, self.quantity.attain(loop, places), key=lambda found: found.value)


def first_cells(
    loop: UncertainLoop, bounds: Bounds, omega: tuple[float, float], beyond: Bounds | None = None
) -> Cells | None:
    """Cells that cover the frequencies for every time factor of the box, and of a wider one `beyond`; None:
    past the bound on work.
    """
    low_v, high_v = bounds.log_time
    edges_v = [_even_edges(low_v, high_v, STEP_OF_TIME_FACTOR)]
    if beyond is not None:
        # an edge of the box is one of the cells
        edges_v.insert(0, _even_edges(min(beyond.log_time[0], low_v), low_v, STEP_OF_TIME_FACTOR)[:-1])
        edges_v.append(_even_edges(high_v, max(beyond.log_time[1], high_v), STEP_OF_TIME_FACTOR)[1:])
    v = np.concatenate(edges_v)
    v = np.array([low_v, high_v]) if len(v) == 1 else v
    w = _edges(loop, bounds, math.log(omega[0]) + v[0], math.log(omega[1]) + v[-1])
    shape = (len(v) - 1, len(w) - 1)
    if shape[0] * shape[1] > min(MAX_CELLS, MAX_FACTORS / _work_of_a_cell(loop)):
        return None
    edges = w[:-1], w[1:], v[:-1, None], v[1:, None]
    places = Rectangles(*((part + np.zeros(shape)).ravel() for part in edges))
    return enclose(loop, places, *places.centre)


def _work_of_a_cell(loop: UncertainLoop) -> int:
    return FACTORS_OF_A_CELL + len(loop.roots)


def _even_edges(low: float, high: float, step: float) -> Reals:
    """Edges from low to high, one where they are the same."""
    count = math.ceil((high - low) / step)
    # the last edge is the end itself to the last digit
    return np.append(low + (high - low) * (np.arange(count) / max(count, 1)), high)


def _edges(loop: UncertainLoop, bounds: Bounds, low: float, high: float) -> Reals:
    """Edges in w from low to high: narrow about the loop's own frequencies, wide elsewhere."""
    sizes = np.abs(loop.roots[loop.roots != 0])
    marks = [math.log(size) for size in sizes.tolist()]
    if bounds.dead_time[1] > 0:
        marks.append(-math.log(bounds.dead_time[1]))
    if not marks:
        marks = [0.5 * (low + high)]
    spread = 1.5 + bounds.log_time[1] - bounds.log_time[0]
    inner_low = min(max(min(marks) - spread, low), high)
    inner_high = max(min(max(marks) + spread, high), inner_low)
    parts = [
        _even_edges(start, end, width)[:-1]
        for start, end, width in (
            (low, inner_low, COARSE_STEP),
            (inner_low, inner_high, STEP),
            (inner_high, high, COARSE_STEP),
        )
        if end > start
    ]
    return np.concatenate([*parts, [high]])


def sweep(loop: UncertainLoop, cells: Cells, searches: list[Search]) -> None:
    """Prove the level of every search over the cells, lowering it where members are met that have less."""
    sectors = Sectors.of([each.sector for each in searches])
    pending, chosen = np.nonzero(~excluded_at_sight(cells, sectors.columns))
    _keep_to_a_wave(searches, np.bincount(pending, minlength=len(searches)))
    going_on = _going_on(searches)[pending]
    pending, cells, wave = pending[going_on], cells.only(chosen[going_on]), 0
    while pending.size:
        of_cells = sectors.only(pending)
        out, inside = excluded(cells, of_cells, about_corners=wave > 0)
        if wave > 0 and not out.all():
            out |= excluded_at_sight(cells, of_cells)
        left = np.flatnonzero(~out)
        if not left.size:
            return
        pending = pending[left]
        levels = [each.level for each in searches]
        for index, search in enumerate(searches):
            mine = left[pending == index]
            if mine.size and (wave >= WAVE_THAT_TRIES or inside[mine].any()):
                search.improve(loop, cells.only(mine))
        if levels != [each.level for each in searches]:
            sectors = Sectors.of([each.sector for each in searches])
        cells, pending = _next_wave(loop, cells, searches, left, pending)
        wave += 1


def _next_wave(
    loop: UncertainLoop, cells: Cells, searches: list[Search], left: Indices, pending: Indices
) -> tuple[Cells, Indices]:
    """(The parts of the cells that are left, whose they are); searches past their bound on work end here.

    A cell that holds the best place known is cut there, and the parts about it are enclosed about it.
    """
    parts_w, parts_v = _parts(cells, left)
    counts = (parts_w * parts_v).astype(np.intp)
    cells_of_each = np.bincount(pending, counts, len(searches)).astype(np.intp)
    refuted = any(search.meets_unstable for search in searches)
    for search, more in zip(searches, cells_of_each.tolist(), strict=True):
        search.work += int(more) * _work_of_a_cell(loop)
        search.given_up |= search.work > MAX_FACTORS or (refuted and not search.of_any_box)
    _keep_to_a_wave(searches, cells_of_each)
    counts *= _going_on(searches)[pending]
    source = np.repeat(np.arange(len(left)), counts)
    number = np.arange(len(source)) - np.repeat(np.cumsum(counts) - counts, counts)
    best = np.array([each.best.place or (math.nan, math.nan) for each in searches])[pending[source]]
    place = cells.places.only(left[source])
    along_w, along_v = parts_w[source], parts_v[source]
    low_w, high_w = _cut(place.low_w, place.high_w, along_w, number % along_w, best[:, 0])
    low_v, high_v = _cut(place.low_v, place.high_v, along_v, number // along_w, best[:, 1])
    places = Rectangles(low_w, high_w, low_v, high_v)
    about = (low_w <= best[:, 0]) & (best[:, 0] <= high_w) & (low_v <= best[:, 1]) & (best[:, 1] <= high_v)
    middle_w, middle_v = places.centre
    w, v = np.where(about, best[:, 0], middle_w), np.where(about, best[:, 1], middle_v)
    return enclose(loop, places, w, v), pending[source]


def _going_on(searches: list[Search]) -> Flags:
    return ~np.array([search.given_up for search in searches])


def _keep_to_a_wave(searches: list[Search], cells_of_each: Indices) -> None:
    """Give up the searches that have most cells until the rest make a wave."""
    if cells_of_each.sum() <= MAX_CELLS:
        return
    for index in np.argsort(-cells_of_each):
        if (cells_of_each * _going_on(searches)).sum() <= MAX_CELLS:
            return
        searches[index].given_up = True


def _parts(cells: Cells, left: Indices) -> tuple[Reals, Reals]:
    """Into how many parts to divide some cells along w and v."""
    place, slope = cells.places.only(left), cells.response
    width_w, width_v = place.high_w - place.low_w, place.high_v - place.low_v
    # errors fall with the square of the width; a wave is kept to a size at which its overhead is paid for
    of_v = cells.bend_rest + slope.x_v**2 + slope.y_v**2
    of_w = of_v + cells.bend_plant + slope.x_w**2 + slope.y_w**2
    most = min(max(CHILDREN / len(left), FEWEST_PARTS), MOST_PARTS)
    # a width that costs nothing is not divided
    ratio = np.sqrt(of_w / of_v)[left] * width_w / width_v
    ratio = np.where(ratio == ratio, ratio, np.inf)
    along_w = np.floor(np.minimum(np.maximum(np.sqrt(most * ratio), 2.0), most))
    return along_w, np.where(width_v > 0, np.maximum(np.floor(most / along_w), 1.0), 1.0)


def _cut(low: Reals, high: Reals, parts: Reals, number: Reals, place: Reals) -> Reals:
    """(Lower, upper edge) of the part of that number; the inner edge nearest to a place inside is moved to
    it.
    """
    width = (high - low) / parts
    inside = (low < place) & (place < high) & (parts > 1)
    nearest = np.where(inside, np.minimum(np.maximum(np.rint((place - low) / width), 1.0), parts - 1.0), -1.0)
    index = np.array([number, number + 1.0])
    # the last edge is the cell's own to the last digit
    edges = np.where(index == parts, high, low + index * width)
    return np.where(index == nearest, place, edges)
