"""Branch and bound over the cells of a box: the least value of a function, proven from below.

Works in waves: all cells of a wave are bounded at once. A cell whose bound is not below what has been
attained, less the tolerance, is dropped; the others are divided. What comes out is a proof whether or not the
attained value is the least one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple, Protocol

import numpy as np
import numpy.typing as npt

from service.analysis.box import Bounds, Cells, Corners, UncertainLoop
from service.analysis.loop import Reals

STEP = 0.2
"""Width of a first cell in ln ω where the loop has its dynamics."""

COARSE_STEP = 1.2
"""The same where L is nearly a power of ω."""

STEP_OF_TIME_FACTOR = 0.25
"""Width of a first cell in ln f."""

MAX_FACTORS = 1_500_000
"""Work bound of one search: cells times factors of the loop."""

CHILDREN = 200
"""Few cells are divided into about so many at once, many into halves."""

WAVE_THAT_TRIES = 3
"""From this wave on a lower value is looked for again: until then the first one mostly suffices."""

TRIED = 4
"""The most promising cells of a wave in which a lower value is looked for."""


class Found(NamedTuple):
    """A value and where it was met; inf and None: nowhere."""

    value: float
    place: tuple[float, float] | None = None


class Quantity(Protocol):
    """What is minimised over a box."""

    def bound(self, cells: Cells, attained: float) -> tuple[Reals, Reals, Reals, Reals | None]:
        """(A bound below the value in each cell, what its widths in w and v cost, the value at its centre);
        (q,) each, the last None where it takes more to know it.

        A bound is inf where the value does not exist in the cell, and may be anything that is not above the
        value; nan counts as unknown.
        """

    def attain(self, loop: UncertainLoop, corners: Corners) -> Found:
        """The least value met in or beside some cells."""

    def slack(self, attained: float) -> float:
        """How far below a finite attained value the least one may stay unknown."""


class WorkBoundError(Exception):
    """The search has reached its bound on work; what was known by then."""

    def __init__(self, known: Minimum) -> None:
        super().__init__("more cells than the work bound allows")
        self.known = known


@dataclass(frozen=True, slots=True)
class Minimum:
    """The least value lies from `proven` to `attained`; both inf: the quantity exists nowhere.

    `place`: (w, v) where it is attained, None where the search began with it.
    """

    proven: float
    attained: float
    place: tuple[float, float] | None = None


def first_cells(
    loop: UncertainLoop, bounds: Bounds, lowest_omega: float, highest_omega: float, step: float = STEP
) -> Cells:
    """Cells that cover the frequencies from `lowest_omega` to `highest_omega` for every time factor."""
    low_v, high_v = bounds.log_time
    edges = _edges(loop, bounds, math.log(lowest_omega) + low_v, math.log(highest_omega) + high_v, step)
    middle, half = 0.5 * (edges[:-1] + edges[1:]), 0.5 * np.diff(edges)
    parts = max(1, math.ceil((high_v - low_v) / STEP_OF_TIME_FACTOR))
    if parts * len(middle) * len(loop.roots) > MAX_FACTORS:
        raise WorkBoundError(Minimum(-math.inf, math.inf))
    half_v = 0.5 * (high_v - low_v) / parts
    v = low_v + half_v * (2.0 * np.arange(parts) + 1.0)
    shape = (parts, len(middle))
    return loop.cells(
        np.broadcast_to(middle, shape).ravel(),
        np.broadcast_to(v[:, None], shape).ravel(),
        np.broadcast_to(half * (1.0 + 1e-12), shape).ravel(),
        np.full(parts * len(middle), half_v),
    )


def _edges(loop: UncertainLoop, bounds: Bounds, low: float, high: float, step: float) -> Reals:
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
        np.linspace(start, end, max(1, math.ceil((end - start) / width)) + 1)[:-1]
        for start, end, width in (
            (low, inner_low, COARSE_STEP),
            (inner_low, inner_high, step),
            (inner_high, high, COARSE_STEP),
        )
        if end > start
    ]
    return np.concatenate([*parts, [high]])


def minimum(quantity: Quantity, cells: Cells, attained: float, proven_elsewhere: float = math.inf) -> Minimum:
    """The least value over the cells, `attained` being known; `proven_elsewhere` bounds it outside of them.

    Raises WorkBoundError with what was known by then.
    """
    loop, best, work, wave = cells.loop, Found(attained), 0, 0
    while True:
        lowest, cost_w, cost_v, centres = quantity.bound(cells, best.value)
        if centres is not None and centres.size:
            index = int(np.argmin(centres))
            if centres[index] < best.value:
                best = Found(float(centres[index]), (float(cells.w[index]), float(cells.v[index])))
        # nan: nothing is known of the cell
        kept = np.flatnonzero(~(lowest >= _threshold(quantity, best.value)))
        if kept.size and (wave == 0 or wave >= WAVE_THAT_TRIES or math.isinf(best.value)):
            promise = lowest if centres is None else centres
            order = kept[np.argsort(promise[kept])][:TRIED]
            found = quantity.attain(loop, cells.only(order))
            if found.value < best.value:
                best = found
                kept = kept[~(lowest[kept] >= _threshold(quantity, best.value))]
        if not kept.size:
            proven = min(proven_elsewhere, _threshold(quantity, best.value))
            return Minimum(proven, best.value, best.place)
        known = np.where(lowest[kept] == lowest[kept], lowest[kept], -np.inf)
        missing: Reals | float = np.inf
        if math.isfinite(best.value):
            missing = (_threshold(quantity, best.value) - known) / quantity.slack(best.value)
        parts = _parts(missing, cost_w[kept], cost_v[kept])
        work += int(parts[0] @ parts[1]) * len(loop.roots)
        if work > MAX_FACTORS:
            raise WorkBoundError(Minimum(min(proven_elsewhere, float(known.min())), best.value, best.place))
        cells, wave = _divided(cells, kept, *parts), wave + 1


def _threshold(quantity: Quantity, attained: float) -> float:
    """What a cell's bound must reach for the cell to be dropped."""
    return attained - quantity.slack(attained) if math.isfinite(attained) else math.inf


def _parts(missing: Reals | float, cost_w: Reals, cost_v: Reals) -> tuple[Reals, Reals]:
    """Into how many parts to divide each cell along w and v; `missing` in units of the slack."""
    # errors fall with the square of the width; a wave is kept to a size at which its overhead is paid for
    most = max(2, CHILDREN // len(cost_w))
    wanted = np.clip(2.0 * np.sqrt(missing + 1.0), 2.0, most) * np.ones(len(cost_w))
    along_w = cost_w >= cost_v
    ratio = np.sqrt(np.where(along_w, cost_v / cost_w, cost_w / cost_v))
    minor = np.fmax(wanted * np.where(ratio == ratio, ratio, 0.0), 1.0)
    # where both cannot be had the narrower parts are those of the width that costs more
    share = np.sqrt(np.minimum(most / (wanted * minor), 1.0))
    minor = np.floor(np.fmax(minor * share, 1.0))
    major = np.floor(np.clip(wanted, 2.0, np.fmax(most / minor, 2.0)))
    return np.where(along_w, major, minor), np.where(along_w, minor, major)


def _divided(cells: Cells, kept: npt.NDArray[np.intp], parts_w: Reals, parts_v: Reals) -> Cells:
    counts = (parts_w * parts_v).astype(np.intp)
    source = np.repeat(np.arange(len(kept)), counts)
    within = np.arange(len(source)) - np.repeat(np.cumsum(counts) - counts, counts)
    of_w, of_v = within % parts_w[source], within // parts_w[source]
    w, v, half_w, half_v = (part[source] for part in cells.only(kept))
    new_w, new_v = half_w / parts_w[source], half_v / parts_v[source]
    return cells.loop.cells(
        w - half_w + new_w * (2.0 * of_w + 1.0),
        v - half_v + new_v * (2.0 * of_v + 1.0),
        new_w * (1.0 + 1e-12),
        new_v,
    )
