"""Step responses of the closed loop, dead time exact, as polynomial pieces.

With dead time: the method of steps. On each interval of one dead time the delayed input is known from the
interval before, and the states follow by Chebyshev collocation; the map from one interval to the next is
constant. Intervals are divided as the open loop's own modes ask, finer after each kink. When the roots left
out have died away the response goes on as the series of the residues at the rightmost characteristic roots;
the series is compared with the march on its last interval before it is used.

Without dead time: matrix exponentials at the nodes of a piece, doubled as the faster modes die; that needs no
eigenvectors, so that multiple roots do no harm.

Sources: A. Bellen, M. Zennaro, Numerical Methods for Delay Differential Equations (Oxford 2003), for the
method of steps; C. Moler, C. Van Loan, Nineteen dubious ways to compute the exponential of a matrix, SIAM
Review 45 (2003), for scaling and squaring. From memory.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass, replace

import numpy as np

from service.analysis import chebyshev
from service.analysis.chebyshev import NODES
from service.analysis.errors import WorkBoundError
from service.analysis.exponentials import exponentials_less_one
from service.analysis.loop import ClosedLoopParts, Complexes, Reals
from service.analysis.realisation import StateSpace
from service.analysis.roots import CharacteristicRoots
from service.analysis.tails import Tail
from service.analysis.terms import ParallelTerms

SETPOINT, LOAD = 0, 1

TURN = 6.0
"""Largest abs λ·length of a piece for a mode λ that has not died away."""

DIED_AWAY = 36.0
"""A mode has died away after so many of its time constants (e^-36 is below float64)."""

MAX_PIECES = 3000
"""Work bound: a response that needs more pieces than this is called too slow."""

ALONE = 30.0
"""An oscillation is alone when all else has died away against it by so many nepers (1e-13)."""

WORTHWHILE_PIECES = 10
"""A closed form behind the pieces is worth its while when it saves more pieces than this."""

LEFT_OUT_DIED_AWAY = 32.0
"""Roots left of the line are left out of the residue series after so many of its time constants."""

HAND_OVER = 1e-9
"""How well the residue series must meet the march in PV, relative to the largest value, to take over."""

OUTPUT_HAND_OVER = 1e-6
"""The same in the output, where a derivative with a short filter multiplies PV's rounding."""

ROUNDING = 1e-14
"""What float64 leaves of a sum of terms of size 1."""


@dataclass(frozen=True, eq=False)
class Responses:
    """Set-point and load response in pieces, in the loop's own unit of time.

    `start`, `length`: (p,). `pv`, `output`: (2, p, nodes), set point first, at Chebyshev points of each
    piece; an output that is held in each piece has one node.
    `final_pv`, `final_output`: (2,). `complete`: the pieces end where nothing moves any more, or where the
    oscillation in `pv_tails` and `output_tails` (about the final values) is all that moves.
    """

    start: Reals
    length: Reals
    pv: Reals
    output: Reals
    final_pv: Reals
    final_output: Reals
    complete: bool
    pv_tails: tuple[Tail, Tail] | None = None
    output_tails: tuple[Tail, Tail] | None = None


def respond(parts: ClosedLoopParts, space: StateSpace, roots: CharacteristicRoots) -> Responses:
    """Both step responses of a stable loop."""
    known = _Known(
        parts=parts,
        space=space,
        modes=np.concatenate([roots.roots, parts.hidden_roots]),
        line=roots.complete_right_of,
        series=_ResidueSeries.of(parts, roots),
        final=final_values(space),
    )
    plan = _plan(known)
    responses = _in_pieces(known, plan)
    if plan.oscillation is not None and responses.complete:
        ended = _with_tails(responses, known, plan.oscillation)
        if ended is not None:
            return ended
        responses = _in_pieces(known, _Plan(plan.until_rest, None, plan.until_rest))
    return replace(responses, complete=responses.complete and _at_rest(responses))


@dataclass(frozen=True, eq=False)
class _Known:
    """What responses are computed from: `modes`, all roots right of `line`, and the residues at them."""

    parts: ClosedLoopParts
    space: StateSpace
    modes: Complexes
    line: float
    series: _ResidueSeries | None
    final: tuple[Reals, Reals]


@dataclass(frozen=True, slots=True)
class _Plan:
    """How long pieces are needed: until `end`, where all has died away or `oscillation` (a root) alone is
    left.
    """

    end: float
    oscillation: complex | None
    until_rest: float


def _plan(known: _Known) -> _Plan:
    upper = known.modes[known.modes.imag >= 0]
    upper = upper[np.argsort(-upper.real)]
    if known.line >= 0 or (not upper.size and known.parts.dead_time > 0):
        # the roots are not known: only the march itself can show when all has come to rest
        return _Plan(math.inf, None, math.inf)
    if not upper.size:
        return _Plan(0.0, None, 0.0)
    slowest = complex(upper[0])
    end = DIED_AWAY / -slowest.real
    next_real = max(known.line, float(upper[1].real) if len(upper) > 1 else -math.inf)
    if slowest.imag <= 0 or next_real >= slowest.real:
        return _Plan(end, None, end)
    # a period more, so that the largest turns lie in the pieces
    alone = ALONE / (slowest.real - next_real) + 2.0 * math.pi / slowest.imag
    worthwhile = (end - alone) * abs(slowest) / TURN > WORTHWHILE_PIECES
    return _Plan(alone, slowest, end) if worthwhile else _Plan(end, None, end)


def _in_pieces(known: _Known, plan: _Plan) -> Responses:
    start, length, pv, output, complete = (
        _without_dead_time(known, plan) if known.parts.dead_time == 0 else _with_dead_time(known, plan)
    )
    return Responses(start, length, pv, output, *known.final, complete)


def _at_rest(responses: Responses) -> bool:
    """Whether the last value is the final one: the pieces' own word that they are complete."""
    for values, final, share in (
        (responses.pv, responses.final_pv, HAND_OVER),
        (responses.output, responses.final_output, OUTPUT_HAND_OVER),
    ):
        scale = np.maximum(np.abs(values).max(axis=(1, 2)), np.abs(final))
        if np.any(np.abs(values[:, -1, -1] - final) > share * scale):
            return False
    return True


def _with_tails(responses: Responses, known: _Known, root: complex) -> Responses | None:
    """The responses with the oscillation behind their pieces; None where it does not meet the last one."""
    series = known.series
    if series is None:
        return None
    begin = float(responses.start[-1] + responses.length[-1])
    index = int(np.argmin(np.abs(series.roots - root)))
    turned = cmath.exp(root * begin)
    tails = []
    for amplitudes, values, final in (
        (series.pv, responses.pv, responses.final_pv),
        (series.output, responses.output, responses.final_output),
    ):
        for which in (SETPOINT, LOAD):
            tail = Tail(begin, root, complex(amplitudes[which, index]) * turned)
            gap = abs(float(values[which, -1, -1] - final[which]) - tail.value(0.0))
            scale = float(np.abs(values[which]).max())
            share = HAND_OVER if amplitudes is series.pv else OUTPUT_HAND_OVER
            if gap > share * tail.envelope + 1e-12 * scale:
                return None
            tails.append(tail)
    return replace(responses, pv_tails=(tails[0], tails[1]), output_tails=(tails[2], tails[3]))


Pieces = tuple[Reals, Reals, Reals, Reals, bool]


def final_values(space: StateSpace) -> tuple[Reals, Reals]:
    """Where PV and output come to rest, (2,) each: the closed loop's equilibrium, in which dead time plays no
    part.
    """
    closed, k = space.closed_without_dead_time()
    forcing = np.column_stack([space.b_r + k * space.d_r * space.b_w, k * space.b_w])
    states = -np.linalg.solve(closed, forcing) if space.order else np.zeros((0, 2))
    u = k * (space.c_u @ states + np.array([space.d_r, space.d_u]))
    w = u + np.array([0.0, 1.0])
    return space.c_y @ states + space.d_y * w, u


def _without_dead_time(known: _Known, plan: _Plan) -> Pieces:
    space = known.space
    n = space.order
    matrix, rows = _augmented(space)
    modes = by_size(known.modes)
    ladder = _Doubling(matrix, rows, TURN / fastest(modes, 0.0))
    state = np.zeros((n + 2, 2))
    state[n, SETPOINT] = state[n + 1, LOAD] = 1.0
    _, k = space.closed_without_dead_time()
    state[:n, SETPOINT] = space.b_w * k * space.setpoint_impulse
    time = 0.0
    starts: list[float] = []
    lengths: list[float] = []
    values: list[Reals] = []
    while (time < plan.end or not starts) and len(starts) < MAX_PIECES:
        level = ladder.level(TURN / fastest(modes, time))
        to_end, to_nodes, length = ladder.step(level)
        starts.append(time)
        lengths.append(length)
        values.append(to_nodes @ state)
        state = to_end @ state
        time += length
    shaped = np.array(values).reshape(len(starts), 2, NODES, 2)
    pv, output = (np.ascontiguousarray(np.moveaxis(shaped[:, which], 2, 0)) for which in (0, 1))
    return np.array(starts), np.array(lengths), pv, output, time >= plan.end


def _augmented(space: StateSpace) -> tuple[Reals, Reals]:
    """The closed loop with its two constant inputs as states, (n+2, n+2), and the rows of PV and output, (2,
    n+2).
    """
    closed, k = space.closed_without_dead_time()
    n = space.order
    matrix, rows = np.zeros((n + 2, n + 2)), np.zeros((2, n + 2))
    matrix[:n, :n] = closed
    matrix[:n, n] = space.b_r + k * space.d_r * space.b_w
    matrix[:n, n + 1] = k * space.b_w
    w = k * np.concatenate([space.c_u, [space.d_r, 1.0]])
    rows[0, :n] = space.c_y
    rows[0] += space.d_y * w
    rows[1] = k * np.concatenate([space.c_u, [space.d_r, space.d_u]])
    return matrix, rows


class _Doubling:
    """Exponentials at the nodes of a piece, for a first length and its doublings."""

    def __init__(self, matrix: Reals, rows: Reals, length: float) -> None:
        self._rows = rows
        self._length = length
        self._exponentials = [
            exponentials_less_one(matrix, length * chebyshev.points(NODES)) + np.eye(len(matrix))
        ]
        self._steps: dict[int, tuple[Reals, Reals, float]] = {}

    def level(self, longest: float) -> int:
        """The number of doublings that stays within `longest`."""
        return max(0, math.floor(math.log2(longest / self._length * (1 + 1e-12))))

    def step(self, level: int) -> tuple[Reals, Reals, float]:
        """(map to the end of the piece, map to PV and output at its nodes, length)."""
        if level not in self._steps:
            while len(self._exponentials) <= level:
                last = self._exponentials[-1]
                self._exponentials.append(last @ last)
            at_nodes = self._exponentials[level]
            to_nodes = np.moveaxis(self._rows @ at_nodes, 1, 0).reshape(2 * NODES, -1)
            self._steps[level] = (at_nodes[-1], to_nodes, self._length * 2.0**level)
        return self._steps[level]


def _with_dead_time(known: _Known, plan: _Plan) -> Pieces:
    march, dead_time = _March(known.parts, known.space), known.parts.dead_time
    end = max(plan.end, 2 * dead_time)
    wanted = LEFT_OUT_DIED_AWAY / (-known.line * dead_time) if -math.inf < known.line < 0 else math.inf
    most = max(12, MAX_PIECES // march.pieces_each)
    march.run(math.ceil(min(max(wanted, 12.0), most, max(end / dead_time, 2.0))))
    met = math.isfinite(wanted) and march.time < end and march.meets(known)
    while not met and march.time < end and march.piece_count < MAX_PIECES:
        march.run(16)
    if not met or march.time >= end:
        return march.pieces(march.time >= end)
    return _continued(march, known, end)


class _March:
    """The method of steps from rest, both responses side by side."""

    def __init__(self, parts: ClosedLoopParts, space: StateSpace) -> None:
        self._space, self.dead_time = space, parts.dead_time
        self._lengths = _divided_dead_time(parts)
        maps = {length: _collocation_map(space, length) for length in set(self._lengths)}
        self._maps = [maps[length] for length in self._lengths]
        self.pieces_each = len(self._lengths)
        self._state = np.zeros((space.order, 2))
        # what each piece of the next interval starts from: state, delayed input at the nodes, set point
        self._known = [np.zeros((space.order + NODES + 1, 2)) for _ in self._lengths]
        for known in self._known:
            known[-1, SETPOINT] = 1.0
        self._impulse = space.setpoint_impulse
        self._outputs: list[Reals] = []
        self._pvs: list[Reals] = []
        self.intervals = 0

    @property
    def time(self) -> float:
        """Where the march stands."""
        return self.intervals * self.dead_time

    @property
    def piece_count(self) -> int:
        """Pieces so far."""
        return self.intervals * self.pieces_each

    def run(self, intervals: int) -> None:
        """March on by so many dead times."""
        for _ in range(intervals):
            self._one_interval()

    def _one_interval(self) -> None:
        order = self._space.order
        if self.intervals > 0 and self._impulse != 0:
            self._state[:, SETPOINT] += self._space.b_w * self._impulse
            self._impulse *= self._space.d_u
        for mapping, known in zip(self._maps, self._known, strict=True):
            known[:order] = self._state
            result = mapping @ known
            self._state = result[:order]
            output = result[order : order + NODES]
            self._outputs.append(output)
            self._pvs.append(result[order + NODES :])
            known[order:-1] = output
            known[order:-1, LOAD] += 1.0
        self.intervals += 1

    def meets(self, known: _Known) -> bool:
        """Whether the residue series gives the last interval marched."""
        if known.series is None:
            return False
        begin = self.time - self.dead_time
        starts = begin + np.concatenate([[0.0], np.cumsum(self._lengths)[:-1]])
        continued = known.series.values(starts, np.array(self._lengths), known.final)
        own = (
            (self._pvs, known.series.pv, HAND_OVER),
            (self._outputs, known.series.output, OUTPUT_HAND_OVER),
        )
        for (marched, amplitudes, share), theirs, final in zip(own, continued, known.final, strict=True):
            scale = np.maximum(np.abs(_stacked(marched)).max(axis=(1, 2)), np.abs(final))
            rounding = ROUNDING * np.abs(amplitudes).sum(axis=1)
            gap = np.abs(_stacked(marched[-self.pieces_each :]) - theirs).max(axis=(1, 2))
            if np.any(gap > share * scale + rounding):
                return False
        return True

    def pieces(self, complete: bool) -> Pieces:
        """All pieces so far."""
        lengths, intervals = np.array(self._lengths), np.arange(self.intervals)[:, None]
        within = np.concatenate([[0.0], np.cumsum(lengths)[:-1]])
        return (
            (intervals * self.dead_time + within).ravel(),
            (0.0 * intervals + lengths).ravel(),
            _stacked(self._pvs),
            _stacked(self._outputs),
            complete,
        )


def _stacked(pieces: list[Reals]) -> Reals:
    """(p, NODES, 2) as (2, p, NODES)."""
    return np.ascontiguousarray(np.moveaxis(np.array(pieces), 2, 0))


def _divided_dead_time(parts: ClosedLoopParts) -> list[float]:
    """Lengths that divide one dead time as the open loop's modes ask."""
    plant_poles = np.array(parts.plant.poles_rad_s, complex)
    return divided(parts.dead_time, by_size(np.concatenate([plant_poles, parts.filtered_controller.poles])))


def divided(length: float, modes: Fading) -> list[float]:
    """Lengths that divide `length`, halves of halves, each short against every mode not yet died away.

    Raises WorkBoundError where they would be more than `MAX_PIECES`.
    """
    position = 0.0
    lengths: list[float] = []
    while position < 1.0 - 1e-12:
        if len(lengths) >= MAX_PIECES:
            raise WorkBoundError("too many pieces")
        longest = TURN / fastest(modes, position * length) / length
        part = 1.0
        while part > longest or (position / part) % 1.0 != 0.0:
            part *= 0.5
        lengths.append(part * length)
        position += part
    return lengths


Fading = list[tuple[float, float]]
"""(abs λ, how fast it dies away) of some modes, the fastest first."""


def by_size(modes: Complexes) -> Fading:
    """The modes by their magnitude."""
    return sorted(((abs(mode), -mode.real) for mode in modes.tolist()), reverse=True)


def fastest(modes: Fading, time: float) -> float:
    """The largest magnitude among the modes that have not died away at `time`."""
    return max(next((size for size, rate in modes if rate * time < DIED_AWAY), 0.0), 1e-12)


def _collocation_map(space: StateSpace, length: float) -> Reals:
    """From (states at the start, delayed input at the nodes, set point) to (states at the end, output and PV
    at the
    nodes), shape (n + 2·NODES, n + NODES + 1)."""
    n, differentiate = space.order, chebyshev.differentiation(NODES)
    known = n + NODES + 1
    states = np.zeros((NODES, n, known))
    states[0, :, :n] = np.eye(n)
    if n:
        inner = NODES - 1
        every, each = np.arange(n), np.arange(inner)
        system = np.zeros((inner, n, inner, n))
        system[:, every, :, every] = differentiate[1:, 1:]
        system[each, :, each] -= length * space.a
        forced = np.zeros((inner, n, known))
        forced[:, :, :n] = -differentiate[1:, 0, None, None] * np.eye(n)
        forced[each, :, n + 1 + each] = length * space.b_w
        forced[:, :, -1] = length * space.b_r
        states[1:] = np.linalg.solve(
            system.reshape(inner * n, inner * n), forced.reshape(inner * n, known)
        ).reshape(inner, n, known)
    delayed, setpoint = np.zeros((NODES, known)), np.zeros(known)
    delayed[np.arange(NODES), n + np.arange(NODES)] = 1.0
    setpoint[-1] = 1.0
    output = space.c_u @ states + space.d_u * delayed + space.d_r * setpoint
    pv = space.c_y @ states + space.d_y * delayed
    return np.concatenate([states[-1], output, pv])


@dataclass(frozen=True, eq=False)
class _ResidueSeries:
    """PV and output as Σ Re(amplitude·e^(root·t)) about the final value; amplitudes (2, m), a pair counted
    once.
    """

    roots: Complexes
    pv: Complexes
    output: Complexes

    @staticmethod
    def of(parts: ClosedLoopParts, found: CharacteristicRoots) -> _ResidueSeries | None:
        """The series over all roots right of the line; None where a cancelled pole is multiple.

        At a root of 1 + L the plant with its dead time is −direction/(C·F), and the derivative of L is −Λ
        with Λ = d ln L/ds; so every residue follows from the controller and Λ alone.
        """
        s = found.roots
        feedback = _controller_at(parts.feedback, s)
        setpoint = _controller_at(parts.setpoint, s)
        filtered = 1.0 / (1.0 + s * parts.measurement_filter)
        weight = np.where(s.imag > 0, 2.0, 1.0) / (s * parts.loop.at(s).log_slope)
        sign = parts.direction
        through = feedback * filtered
        pv = np.array([weight * setpoint / through, weight * sign / through])
        output = np.array([-weight * sign * setpoint, -weight])
        cancelled = _cancelled_modes(parts)
        if cancelled is None:
            return None
        hidden, hidden_pv, hidden_output = cancelled
        return _ResidueSeries(
            np.concatenate([s, hidden]),
            np.concatenate([pv, hidden_pv], axis=1),
            np.concatenate([output, hidden_output], axis=1),
        )

    def values(self, start: Reals, length: Reals, final: tuple[Reals, Reals]) -> tuple[Reals, Reals]:
        """PV and output at the nodes of pieces, (2, p, NODES) each."""
        times = start[:, None] + length[:, None] * chebyshev.points(NODES)
        with np.errstate(under="ignore"):
            modes = np.exp(times[..., None] * self.roots)
        pv = np.moveaxis((modes @ self.pv.T).real, 2, 0) + final[0][:, None, None]
        output = np.moveaxis((modes @ self.output.T).real, 2, 0) + final[1][:, None, None]
        return np.ascontiguousarray(pv), np.ascontiguousarray(output)


def _controller_at(terms: ParallelTerms, s: Complexes) -> Complexes:
    return np.asarray(terms.kp + terms.ki_per_s / s + terms.kd_s * s / (1.0 + terms.tf_s * s))


def _cancelled_modes(parts: ClosedLoopParts) -> tuple[Complexes, Complexes, Complexes] | None:
    """Roots that controller and plant cancel in L, with their amplitudes in PV and output, (2, m) each.

    A plant's pole shows in PV, a controller's in the output of the set-point response alone.
    """
    hidden = parts.hidden_roots[parts.hidden_roots.imag >= 0]
    pv, output = np.zeros((2, len(hidden)), complex), np.zeros((2, len(hidden)), complex)
    poles = np.array(parts.plant.poles_rad_s, complex)
    zeros = np.array(parts.plant.zeros_rad_s, complex)
    for index, root in enumerate(hidden):
        distance = np.abs(poles - root)
        own = distance <= 1e-12 * abs(root)
        if np.count_nonzero(own) != 1:
            # none: a pole of the controller or the filter; several: no simple residue
            return None
        at = np.array([root])
        closed = 1.0 + complex(parts.loop.at(at).value[0])
        residue = parts.plant.gain * np.prod(root - zeros) / np.prod(root - poles[~own])
        weight = (2.0 if root.imag > 0 else 1.0) * residue * np.exp(-root * parts.dead_time) / (root * closed)
        pv[SETPOINT, index] = weight * parts.direction * complex(_controller_at(parts.setpoint, at)[0])
        pv[LOAD, index] = weight
    return hidden, pv, output


def _continued(march: _March, known: _Known, end: float) -> Pieces:
    """The march and behind it the series, in pieces that lengthen as the faster modes die."""
    start, length, pv, output, _ = march.pieces(False)
    time = march.time
    starts: list[float] = []
    lengths: list[float] = []
    modes = by_size(known.modes)
    while time < end and len(starts) + len(start) < MAX_PIECES:
        starts.append(time)
        lengths.append(TURN / fastest(modes, time))
        time += lengths[-1]
    if known.series is None:
        raise AssertionError("the series has met the march")
    more_pv, more_output = known.series.values(np.array(starts), np.array(lengths), known.final)
    return (
        np.concatenate([start, starts]),
        np.concatenate([length, lengths]),
        np.concatenate([pv, more_pv], axis=1),
        np.concatenate([output, more_output], axis=1),
        time >= end,
    )
