"""One plotting area: scales, grid, ticks, and lines drawn into it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from reportlab.graphics.shapes import Group, PolyLine, Rect, String
from reportlab.lib.colors import Color, HexColor

from service.figures import polyline, ticks
from service.figures.fonts import BOLD, REGULAR, width_pt
from service.figures.polyline import Point

INK = HexColor(0x000000)
QUIET = HexColor(0x4D4D4D)
GRID = HexColor(0xCFCFCF)
_THINNING_PT = 0.05
_LEAST = 1e-30
"""What a logarithmic axis takes 0 for: far below any of its ends."""


@dataclass(frozen=True, slots=True)
class Stroke:
    """How a line is drawn; told apart by dashes as well as by colour, so that a grey print can be read."""

    colour: Color
    width_pt: float
    dashes_pt: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True)
class Scale:
    """From a quantity to points on the paper."""

    low: float
    high: float
    start_pt: float
    end_pt: float
    logarithmic: bool = False

    def at(self, value: float) -> float:
        """Where the value stands, in points."""
        low, high = self.low, self.high
        if self.logarithmic:
            least = min(_LEAST, low)
            low, high, value = (math.log10(max(each, least)) for each in (low, high, value))
        if high == low:
            return self.start_pt
        return self.start_pt + (self.end_pt - self.start_pt) * (value - low) / (high - low)

    def ticks(self, at_most: int) -> tuple[tuple[float, ...], tuple[str, ...]]:
        """The values that carry a tick, and what is written beside each."""
        if self.logarithmic:
            values = ticks.decades(self.low, self.high, at_most)
            return values, ticks.decade_labels(values)
        values = ticks.linear(self.low, self.high, at_most)
        return values, ticks.labels(values)


@dataclass(frozen=True, slots=True)
class Panel:
    """A plotting area with its two scales."""

    x: Scale
    y: Scale
    text_pt: float

    def frame(self, heading: str, x_heading: str | None) -> Group:
        """Grid, ticks, border and what the axes are; the x axis bare of figures where it has no heading."""
        group = Group()
        self._horizontals(group)
        self._verticals(group, figures=x_heading is not None)
        x, y = self.x, self.y
        group.add(
            Rect(
                x.start_pt,
                y.start_pt,
                x.end_pt - x.start_pt,
                y.end_pt - y.start_pt,
                fillColor=None,
                strokeColor=QUIET,
                strokeWidth=0.6,
            )
        )
        group.add(text(x.start_pt, y.end_pt + 0.45 * self.text_pt, heading, self.text_pt))
        if x_heading:
            middle = (x.start_pt + x.end_pt) / 2
            group.add(text(middle, y.start_pt - 2.7 * self.text_pt, x_heading, self.text_pt, anchor="middle"))
        return group

    def line(self, points: Sequence[Point], stroke: Stroke) -> Group:
        """A line through the points, cut at the border."""
        group = Group()
        placed = polyline.until([(self.x.at(x), self.y.at(y)) for x, y in points], self.x.end_pt)
        for piece in polyline.within(placed, self.y.start_pt, self.y.end_pt):
            group.add(drawn(polyline.thinned(piece, _THINNING_PT), stroke))
        return group

    def level(self, value: float, stroke: Stroke) -> Group:
        """A line across the whole panel, or nothing where the value lies outside it."""
        return self.line([(self.x.low, value), (self.x.high, value)], stroke)

    def strip(self, low: float, high: float, colour: Color) -> Rect:
        """The area between two ordinates, across the whole panel."""
        foot, top = (self.y.at(min(max(value, self.y.low), self.y.high)) for value in (low, high))
        width = self.x.end_pt - self.x.start_pt
        return Rect(self.x.start_pt, foot, width, top - foot, fillColor=colour, strokeColor=None)

    def _horizontals(self, group: Group) -> None:
        room = int((self.y.end_pt - self.y.start_pt) / (2.2 * self.text_pt)) + 1
        for value, label in zip(*self.y.ticks(max(3, min(room, 7))), strict=True):
            y = self.y.at(value)
            group.add(drawn([(self.x.start_pt, y), (self.x.end_pt, y)], Stroke(GRID, 0.4)))
            group.add(text(self.x.start_pt - 3, y - 0.35 * self.text_pt, label, self.text_pt, anchor="end"))

    def _verticals(self, group: Group, *, figures: bool) -> None:
        room = int((self.x.end_pt - self.x.start_pt) / (5 * self.text_pt)) + 1
        for value, label in zip(*self.x.ticks(max(3, min(room, 9))), strict=True):
            x = self.x.at(value)
            group.add(drawn([(x, self.y.start_pt), (x, self.y.end_pt)], Stroke(GRID, 0.4)))
            if figures:
                group.add(text(x, self.y.start_pt - 1.3 * self.text_pt, label, self.text_pt, anchor="middle"))


def drawn(points: Sequence[Point], stroke: Stroke) -> PolyLine:
    """A line through points already on the paper. Never a `Line`, whose SVG runs back over its own dashes."""
    return PolyLine(
        [coordinate for point in points for coordinate in point],
        strokeColor=stroke.colour,
        strokeWidth=stroke.width_pt,
        strokeDashArray=list(stroke.dashes_pt) or None,
        strokeLineJoin=1,
        strokeLineCap=0,
        fillColor=None,
    )


def text(
    x: float, y: float, words: str, size_pt: float, *, anchor: str = "start", bold: bool = False
) -> String:
    """One line of text."""
    # reportlab's SVG cuts twice the height of a text's foot to a whole number, so only half points look alike
    return String(
        round(x, 2),
        round(2 * y) / 2,
        words,
        fontName=BOLD if bold else REGULAR,
        fontSize=size_pt,
        textAnchor=anchor,
        fillColor=INK,
    )


Entries = Sequence[tuple[str, Stroke]]


def legend(x: float, y: float, entries: Entries, text_pt: float, row_pt: float) -> tuple[Group, float]:
    """Samples of the lines with their names, in rows `row_pt` wide; with it the height of the last row."""
    group = Group()
    left = x
    for name, stroke in entries:
        width = 3 * text_pt + width_pt(name, REGULAR, text_pt)
        if left > x and left + width > x + row_pt:
            left, y = x, y - 1.5 * text_pt
        height = y + 0.35 * text_pt
        group.add(drawn([(left, height), (left + 2.6 * text_pt, height)], stroke))
        group.add(text(left + 3 * text_pt, y, name, text_pt))
        left += width + 1.2 * text_pt
    return group, y
