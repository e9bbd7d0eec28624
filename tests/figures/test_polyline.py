"""Cutting and thinning leave the drawn line where it was."""

from __future__ import annotations

import itertools
import math

from hypothesis import given
from hypothesis import strategies as st

from service.figures import polyline

heights = st.lists(st.floats(-100, 100), min_size=3, max_size=60)


def distance(point: tuple[float, float], line: list[tuple[float, float]]) -> float:
    return min(_to_segment(point, a, b) for a, b in itertools.pairwise(line))


def _to_segment(p: tuple[float, float], a: tuple[float, float], b: tuple[float, float]) -> float:
    length = (b[0] - a[0]) ** 2 + (b[1] - a[1]) ** 2
    along = ((p[0] - a[0]) * (b[0] - a[0]) + (p[1] - a[1]) * (b[1] - a[1])) / length if length else 0.0
    along = min(max(along, 0.0), 1.0)
    return math.hypot(p[0] - a[0] - along * (b[0] - a[0]), p[1] - a[1] - along * (b[1] - a[1]))


@given(heights)
def test_no_left_out_point_lies_farther_from_the_line_than_the_tolerance(values: list[float]) -> None:
    points = [(float(index), value) for index, value in enumerate(values)]
    kept = polyline.thinned(points, 0.5)
    # the method bounds the distance to a whole line; as abscissae rise, that is the distance to its segment
    assert all(distance(point, kept) <= 0.5 + 1e-9 for point in points)


def test_a_straight_line_keeps_its_ends_only() -> None:
    assert polyline.thinned([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)], 0.01) == [(0.0, 0.0), (2.0, 2.0)]


def test_a_line_that_leaves_the_window_comes_back_where_it_crosses_the_border() -> None:
    pieces = polyline.within([(0.0, 0.0), (2.0, 2.0), (4.0, 0.0)], -1.0, 1.0)
    assert pieces == [[(0.0, 0.0), (1.0, 1.0)], [(3.0, 1.0), (4.0, 0.0)]]


@given(heights)
def test_nothing_is_drawn_outside_the_window(values: list[float]) -> None:
    points = [(float(index), value) for index, value in enumerate(values)]
    for piece in polyline.within(points, -10.0, 10.0):
        assert all(-10.0 <= y <= 10.0 for _, y in piece)


def test_a_line_is_cut_at_an_abscissa_between_its_points() -> None:
    assert polyline.until([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)], 1.5) == [(0.0, 0.0), (1.0, 1.0), (1.5, 1.5)]
    assert polyline.until([(0.0, 0.0), (1.0, 1.0)], 5.0) == [(0.0, 0.0), (1.0, 1.0)]


def test_a_line_is_cut_between_two_points_that_stand_a_rounding_apart_in_the_wrong_order() -> None:
    points = [(0.0, 0.0), (7.500000000000001, 1.0), (7.499999999999999, 1.0), (9.0, 2.0)]
    start, (at, height) = polyline.until(points, 7.5)
    assert (start, at) == ((0.0, 0.0), 7.5)
    assert math.isclose(height, 1.0)
