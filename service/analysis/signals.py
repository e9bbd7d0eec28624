"""A response's signals in pieces: where they turn, where they pass a level, and what they add up to.

All turning points of several signals are found in one go, and so are all passages.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from service.analysis import chebyshev
from service.analysis.brackets import newton_zero
from service.analysis.loop import Reals
from service.analysis.tails import Tail

ROUNDING = 1e-11
"""Relative to the largest value, what is rounding in a response."""

SENSITIVE_SHARE = 0.01
"""An extremum this near to a band's edge, relatively, makes the last exit sensitive."""

Indices = npt.NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Passage:
    """A time at which a signal passes a level: known (`length` 0), or to be solved for in one piece.

    `row`: (nodes,), the signal less the level; it changes sign once between the places `low` and `high`, and
    is `at_low` and `at_high` there.
    """

    start: float
    length: float = 0.0
    row: Reals | None = None
    low: float = 0.0
    high: float = 0.0
    at_low: float = 0.0
    at_high: float = 0.0


@dataclass(frozen=True, eq=False)
class Signal:
    """One signal, factor·values − level, `values` (p, nodes), its turning points in order of time, and the
    oscillation that follows.

    `turning_pieces`, `turning_places` (0 to 1), `turning_values`: (m,); both ends of every piece are among
    them.
    `tail` is about the value at which the signal ends, which must be 0 where it is used.
    """

    start: Reals
    length: Reals
    values: Reals
    turning_pieces: Indices
    turning_places: Reals
    turning_values: Reals
    tail: Tail | None
    factor: float = 1.0
    level: float = 0.0

    def rows(self, pieces: int | slice) -> Reals:
        """The signal at the nodes of some pieces."""
        return np.asarray(self.factor * self.values[pieces] - self.level)

    @property
    def scale(self) -> float:
        """The largest magnitude."""
        return float(np.abs(self.turning_values).max())

    @property
    def turning_times(self) -> Reals:
        """When it turns, (m,)."""
        return self.start[self.turning_pieces] + self.length[self.turning_pieces] * self.turning_places

    @property
    def total_variation(self) -> float:
        """Σ abs of every rise and fall, jumps between pieces included."""
        pieces = float(np.abs(self.turning_values[1:] - self.turning_values[:-1]).sum())
        return pieces + (self.tail.total_variation() if self.tail else 0.0)

    def less(self, level: float) -> Signal:
        """The signal minus a constant."""
        return replace(self, level=self.level + level, turning_values=self.turning_values - level)

    def times(self, factor: float) -> Signal:
        """The signal multiplied."""
        tail = None if self.tail is None else replace(self.tail, amplitude=self.tail.amplitude * factor)
        return replace(
            self,
            factor=self.factor * factor,
            level=self.level * factor,
            turning_values=self.turning_values * factor,
            tail=tail,
        )

    def first_passage(self, level: float) -> Passage | None:
        """The first time at or above `level`; None where it never gets there."""
        reached = self.turning_values >= level
        index = int(np.argmax(reached))
        if not reached[index]:
            return None
        piece, place = int(self.turning_pieces[index]), float(self.turning_places[index])
        if place == 0.0:
            return Passage(float(self.start[piece]))
        # it rises all the way from the turning point before
        return self._passage(index - 1, 1.0, level)

    def last_exit(self, band: float) -> Passage:
        """The last time at which abs of the signal is above `band`; 0 where it never is."""
        if self.tail and (late := self.tail.last_exit(band)) is not None:
            return Passage(late)
        outside = (np.abs(self.turning_values) > band).nonzero()[0]
        if not outside.size:
            return Passage(0.0)
        index = int(outside[-1])
        piece, place = int(self.turning_pieces[index]), float(self.turning_places[index])
        if place == 1.0:
            return Passage(float(self.start[piece] + self.length[piece]))
        return self._passage(index, float(np.sign(self.turning_values[index])), band)

    def turns_near_edge(self, band: float) -> bool:
        """Whether an extremum that could move the last exit lies within 1 % of the band's edge."""
        if self.tail and self.tail.turns_near(band, SENSITIVE_SHARE):
            return True
        size = np.abs(self.turning_values)
        clearly_outside = (size > band * (1 + SENSITIVE_SHARE)).nonzero()[0]
        late = slice(int(clearly_outside[-1]) + 1 if clearly_outside.size else 0, None)
        # the ends of pieces are no extrema; where the signal passes the edge there it is merely crossing
        inner = (self.turning_places[late] > 0) & (self.turning_places[late] < 1)
        return bool(np.any(inner & (np.abs(size[late] - band) <= SENSITIVE_SHARE * band)))

    def _passage(self, index: int, side: float, level: float) -> Passage:
        """Where `side` times the signal passes the level between a turning point and the next."""
        piece = int(self.turning_pieces[index])
        low, high = self.turning_places[index : index + 2].tolist()
        ends = side * self.turning_values[index : index + 2] - level
        row = side * self.rows(piece) - level
        return Passage(float(self.start[piece]), float(self.length[piece]), row, low, high, *ends.tolist())


@dataclass(frozen=True, slots=True)
class Integrals:
    """∫ abs x dt, ∫ x² dt, ∫ t·abs x dt and ∫ x dt from the step on."""

    absolute: float
    square: float
    time_weighted: float
    signed: float


def signals(start: Reals, length: Reals, values: Reals, tails: list[Tail | None]) -> list[Signal]:
    """Signals with their turning points; `values` (s, p, nodes)."""
    count, pieces, nodes = values.shape
    rows = values.reshape(count * pieces, nodes)
    largest = np.maximum(values.max(axis=(1, 2)), -values.min(axis=(1, 2)))
    noise = np.repeat(ROUNDING * nodes * largest, pieces)
    row, place = chebyshev.zeros_of_rows(rows @ chebyshev.differentiation(nodes).T, noise)
    rows_in_order, places, found = _with_ends(rows, row, place)
    result = []
    for index, tail in enumerate(tails):
        mine = slice(*np.searchsorted(rows_in_order, [index * pieces, (index + 1) * pieces]))
        own = rows_in_order[mine] - index * pieces
        result.append(Signal(start, length, values[index], own, places[mine], found[mine], tail))
    return result


def held_signal(start: Reals, length: Reals, values: Reals) -> Signal:
    """A signal that stays at one value in each piece, `values` (p,), and turns where one begins."""
    every = np.arange(len(values))
    return Signal(start, length, values[:, None], every, np.zeros(len(values)), values, None)


def solved(passages: list[Passage | None]) -> list[float | None]:
    """The times of passages, in the loop's own unit."""
    open_ones = [passage for passage in passages if passage is not None and passage.row is not None]
    places = iter(_places(open_ones))
    return [
        None
        if passage is None
        else passage.start + (passage.length * next(places) if passage.row is not None else 0.0)
        for passage in passages
    ]


def integrals(of: list[Signal]) -> list[Integrals]:
    """The integrals of signals that end at 0 and share their pieces.

    An integral of abs x is the total variation of the integral of x, whose turning points are the zeros of x.
    """
    start, length = of[0].start, of[0].length
    sums = np.zeros((len(of), 4))
    for first in range(0, len(start), chebyshev.ROWS_AT_ONCE):
        block = slice(first, first + chebyshev.ROWS_AT_ONCE)
        values = np.array([signal.rows(block) for signal in of])
        sums += _in_pieces(start[block], length[block], values, [signal.scale for signal in of])
    return [
        Integrals(*(float(total) + more for total, more in zip(in_pieces, _of_tail(signal), strict=True)))
        for signal, in_pieces in zip(of, sums, strict=True)
    ]


def _in_pieces(start: Reals, length: Reals, values: Reals, scales: list[float]) -> Reals:
    """The four integrals of each signal over some pieces, (s, 4); `values` (s, p, nodes)."""
    count, pieces, nodes = values.shape
    rows = values.reshape(count * pieces, nodes)
    start, length = np.concatenate([start] * count), np.concatenate([length] * count)
    row, place = chebyshev.zeros_of_rows(rows, np.repeat(ROUNDING * np.array(scales), pieces))
    over_piece, points = chebyshev.integration(nodes)[-1], chebyshev.points(nodes)
    signed = rows @ over_piece * length
    moment = start * signed + rows @ (over_piece * points) * length**2
    absolute, weighted = np.abs(signed), np.abs(moment)
    if row.size:
        new = np.append(True, row[1:] != row[:-1])
        changing, among = row[new], np.cumsum(new) - 1
        x, lengths = rows[changing], length[changing, None]
        both = np.concatenate([x, x * (start[changing, None] + lengths * points)])
        integrated = both @ chebyshev.integration(nodes).T * np.concatenate([lengths, lengths])
        varied = _variation(integrated, np.append(among, among + len(x)), np.append(place, place))
        absolute[changing], weighted[changing] = varied[: len(x)], varied[len(x) :]
    squares = np.einsum("ij,ij->i", rows @ _of_squares(nodes), rows) * length
    columns = np.array([absolute, squares, weighted, signed])
    return np.asarray(columns.reshape(4, count, pieces).sum(axis=2).T)


def _of_tail(signal: Signal) -> tuple[float, float, float, float]:
    return signal.tail.absolute_integrals() if signal.tail else (0.0, 0.0, 0.0, 0.0)


def _places(passages: list[Passage]) -> list[float]:
    if not passages:
        return []
    rows = np.array([passage.row for passage in passages])
    low, high, at_low, at_high = np.array(
        [(passage.low, passage.high, passage.at_low, passage.at_high) for passage in passages]
    ).T
    secant = low + (high - low) * np.clip(at_low / (at_low - at_high), 0.0, 1.0)
    told = chebyshev.value_and_slope(rows)
    places: list[float] = newton_zero(told, low, high, at_low, 1.0, secant).tolist()
    return places


def _with_ends(rows: Reals, row: Indices, place: Reals) -> tuple[Indices, Reals, Reals]:
    """Places inside rows, in order of row and place, and both ends of every row: row, place, value."""
    inner = chebyshev.evaluate_rows(rows[row], place)
    last = np.cumsum(2 + np.bincount(row, minlength=len(rows))) - 1
    first = np.concatenate([[0], last[:-1] + 1])
    # row r has 1 + 2r ends before its inner places
    between = np.arange(len(row)) + 1 + 2 * row
    total = 2 * len(rows) + len(row)
    rows_of, places, values = np.empty(total, np.intp), np.empty(total), np.empty(total)
    every = np.arange(len(rows))
    for at, of, where, value in (
        (first, every, 0.0, rows[:, 0]),
        (between, row, place, inner),
        (last, every, 1.0, rows[:, -1]),
    ):
        rows_of[at], places[at], values[at] = of, where, value
    return rows_of, places, values


def _variation(integrals_in_rows: Reals, row: Indices, place: Reals) -> Reals:
    """Σ abs of the changes between the given places, row by row, shape (rows,)."""
    rows_of, _, values = _with_ends(integrals_in_rows, row, place)
    changes = np.where(rows_of[1:] == rows_of[:-1], np.abs(values[1:] - values[:-1]), 0.0)
    return np.asarray(np.bincount(rows_of[1:], changes, len(integrals_in_rows)), float)


@lru_cache(maxsize=16)
def _of_squares(nodes: int) -> Reals:
    """The form x·Q·x that gives ∫ x² over [0, 1] from values at the nodes."""
    fine = chebyshev.evaluation(nodes, chebyshev.points(2 * nodes))
    return np.asarray(fine.T * chebyshev.integration(2 * nodes)[-1] @ fine)
