"""Curves as lists of points: cut to a window, thinned to what an eye can tell apart."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

Point = tuple[float, float]


def until(points: Sequence[Point], end: float) -> list[Point]:
    """The points up to abscissa `end`, the last one interpolated there.

    In stored responses an abscissa may lie a rounding before the one ahead of it: what is past the first that
    is beyond `end` is left out.
    """
    past = next((index for index, point in enumerate(points) if point[0] > end), len(points))
    kept = list(points[:past])
    if past < len(points) and kept and kept[-1][0] < end:
        kept.append((end, _ordinate(kept[-1], points[past], end)))
    return kept


def within(points: Sequence[Point], low: float, high: float) -> list[list[Point]]:
    """The pieces of a line that lie between two ordinates, their ends on the border they cross."""
    pieces: list[list[Point]] = []
    for start, stop in itertools.pairwise(points):
        segment = _clipped(start, stop, low, high)
        if segment is None:
            continue
        if pieces and pieces[-1][-1] == segment[0]:
            pieces[-1].append(segment[1])
        else:
            pieces.append(list(segment))
    return pieces


def thinned(points: Sequence[Point], tolerance: float) -> list[Point]:
    """Fewer points, none of the left-out ones farther than `tolerance` from the line that is drawn.

    Douglas and Peucker, "Algorithms for the reduction of the number of points required to represent a
    digitized line or its caricature", Cartographica 10 (1973), with a stack in place of recursion.
    """
    if len(points) < 3:
        return list(points)
    kept = {0, len(points) - 1}
    spans = [(0, len(points) - 1)]
    while spans:
        first, last = spans.pop()
        farthest, distance = _farthest(points, first, last)
        if distance > tolerance:
            kept.add(farthest)
            spans += [(first, farthest), (farthest, last)]
    return [points[index] for index in sorted(kept)]


def _farthest(points: Sequence[Point], first: int, last: int) -> tuple[int, float]:
    (x0, y0), (x1, y1) = points[first], points[last]
    dx, dy = x1 - x0, y1 - y0
    length = math.hypot(dx, dy)
    best, distance = first, 0.0
    for index in range(first + 1, last):
        x, y = points[index]
        off = abs(dx * (y - y0) - dy * (x - x0)) / length if length else math.hypot(x - x0, y - y0)
        if off > distance:
            best, distance = index, off
    return best, distance


def _ordinate(start: Point, stop: Point, at: float) -> float:
    return start[1] + (stop[1] - start[1]) * (at - start[0]) / (stop[0] - start[0])


def _clipped(start: Point, stop: Point, low: float, high: float) -> tuple[Point, Point] | None:
    if max(start[1], stop[1]) < low or min(start[1], stop[1]) > high:
        return None
    return _moved(start, stop, low, high), _moved(stop, start, low, high)


def _moved(point: Point, other: Point, low: float, high: float) -> Point:
    border = min(max(point[1], low), high)
    if border == point[1]:
        return point
    share = (border - point[1]) / (other[1] - point[1])
    return point[0] + share * (other[0] - point[0]), border
