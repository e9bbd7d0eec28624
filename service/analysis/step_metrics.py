"""Metrics of step responses, each at a root or turning point of the response itself.

Definitions are the interface's: rise time from the first passage of 10 % to that of 90 % of the final value;
settling time the last time outside the band about the final value; overshoot and undershoot from the supremum and
infimum; integrals of SP − PV. An integral of abs x is the total variation of the integral of x, so that both come
from the turning points of one function.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from service.analysis import chebyshev
from service.analysis.chebyshev import NODES
from service.analysis.loop import Reals
from service.analysis.responses import LOAD, SETPOINT, Responses
from service.analysis.results import LoadStep, Quantity, SetpointStep
from service.analysis.tails import Tail

ROUNDING = 1e-11
"""Relative to the largest value, what is rounding in a response."""

SENSITIVE_SHARE = 0.01
RECOVERY_BAND = 0.05


@dataclass(frozen=True, eq=False)
class Signal:
    """One signal in pieces: `values` (p, NODES) less `about`, and its turning points in order of time.

    `turning_times`, `turning_values`: (m,), the ends of every piece among them.
    """

    start: Reals
    length: Reals
    values: Reals
    scale: float
    turning_pieces: np.ndarray  # type: ignore[type-arg]
    turning_places: Reals
    turning_values: Reals
    tail: Tail | None = None

    @staticmethod
    def of(start: Reals, length: Reals, values: Reals, tail: Tail | None = None) -> Signal:
        """Find the turning points of a signal given by its values at the nodes of each piece.

        `tail`: the oscillation about the signal's end that follows the last piece.
        """
        scale = float(np.abs(values).max())
        slopes = values @ chebyshev.differentiation(NODES).T
        row, place = chebyshev.zeros_of_rows(slopes, ROUNDING * scale * NODES)
        inner = chebyshev.evaluate_rows(values[row], place)
        count = len(values)
        rows = np.concatenate([np.arange(count), row, np.arange(count)])
        places = np.concatenate([np.zeros(count), place, np.ones(count)])
        found = np.concatenate([values[:, 0], inner, values[:, -1]])
        order = np.lexsort((places, rows))
        return Signal(start, length, values, scale, rows[order], places[order], found[order], tail)

    @property
    def turning_times(self) -> Reals:
        """When it turns, (m,)."""
        return self.start[self.turning_pieces] + self.length[self.turning_pieces] * self.turning_places

    @property
    def total_variation(self) -> float:
        """Σ abs of every rise and fall, jumps between pieces included."""
        pieces = float(np.abs(np.diff(self.turning_values)).sum())
        return pieces + (self.tail.total_variation() if self.tail else 0.0)

    def first_passage(self, level: float) -> float | None:
        """The first time at or above `level`; None where it never gets there."""
        reached = np.flatnonzero(self.turning_values >= level)
        if not reached.size:
            return None
        index = int(reached[0])
        piece, place = int(self.turning_pieces[index]), float(self.turning_places[index])
        if place == 0.0:
            return float(self.start[piece])
        # it rises all the way from the turning point before
        low = np.array([float(self.turning_places[index - 1])])
        row = level - self.values[piece : piece + 1]
        crossing = chebyshev.falling_zero(lambda at: chebyshev.evaluate_rows(row, at), low, np.array([place]))
        return float(self.start[piece] + self.length[piece] * crossing[0])

    def last_exit(self, band: float) -> float:
        """The last time at which abs of the signal is above `band`; 0 where it never is."""
        if self.tail and (late := self.tail.last_exit(band)) is not None:
            return late
        outside = np.flatnonzero(np.abs(self.turning_values) > band)
        if not outside.size:
            return 0.0
        index = int(outside[-1])
        piece, place = int(self.turning_pieces[index]), float(self.turning_places[index])
        if place == 1.0 or index + 1 >= len(self.turning_values):
            return float(self.start[piece] + self.length[piece])
        high = np.array([float(self.turning_places[index + 1])])
        side = np.sign(self.turning_values[index])
        row = side * self.values[piece : piece + 1] - band
        crossing = chebyshev.falling_zero(
            lambda at: chebyshev.evaluate_rows(row, at), np.array([place]), high
        )
        return float(self.start[piece] + self.length[piece] * crossing[0])

    def turns_near_edge(self, band: float) -> bool:
        """Whether an extremum that could move the last exit lies within 1 % of the band's edge."""
        if self.tail and self.tail.turns_near(band, SENSITIVE_SHARE):
            return True
        outside = np.flatnonzero(np.abs(self.turning_values) > band * (1 + SENSITIVE_SHARE))
        # the ends of pieces are no extrema, but the signal passes there only if it is crossing
        late = slice(int(outside[-1]) + 1 if outside.size else 0, None)
        inner = (self.turning_places[late] > 0) & (self.turning_places[late] < 1)
        near = np.abs(np.abs(self.turning_values[late]) - band) <= SENSITIVE_SHARE * band
        return bool(np.any(inner & near))

    def absolute_integrals(self) -> tuple[float, float, float, float]:
        """(∫ abs x dt, ∫ x² dt, ∫ t·abs x dt, ∫ x dt) over all pieces."""
        row, place = chebyshev.zeros_of_rows(self.values, ROUNDING * self.scale)
        times = self.start[:, None] + self.length[:, None] * chebyshev.points(NODES)
        summed = self._integrals(self.values)
        weighted = self._integrals(self.values * times)
        fine = self.values @ _twice_as_fine().T
        square = ((fine * fine) @ _fine_weights()) * self.length
        of_tail = self.tail.absolute_integrals() if self.tail else (0.0, 0.0, 0.0, 0.0)
        return (
            _variation_between(summed, row, place) + of_tail[0],
            float(square.sum()) + of_tail[1],
            _variation_between(weighted, row, place) + of_tail[2],
            float(summed[:, -1].sum()) + of_tail[3],
        )

    def _integrals(self, values: Reals) -> Reals:
        return np.asarray((values @ chebyshev.integration(NODES).T) * self.length[:, None])


def setpoint_step(
    responses: Responses, band_percent: float, unit_rad_s: float, *, impulse: bool
) -> SetpointStep:
    """Metrics of the set-point response; times in seconds. `impulse`: the output holds an impulse at t = 0."""
    final = float(responses.final_pv[SETPOINT])
    pv = Signal.of(responses.start, responses.length, responses.pv[SETPOINT])
    output = Signal.of(
        responses.start,
        responses.length,
        responses.output[SETPOINT],
        _scaled(responses.output_tails, SETPOINT, 1.0),
    )
    meaningful = abs(final) > ROUNDING * max(pv.scale, 1.0)
    offset = abs(1.0 - final) > ROUNDING
    rise = settling = peak_time = over = under = None
    sensitive = False
    if meaningful:
        # divided by the final value the response ends at 1, whatever its sign
        scaled = Signal(
            pv.start,
            pv.length,
            pv.values / final,
            pv.scale / abs(final),
            pv.turning_pieces,
            pv.turning_places,
            pv.turning_values / final,
        )
        tail = _scaled(responses.pv_tails, SETPOINT, 1.0 / final)
        rise = _rise_time(scaled)
        over, peak_time = _overshoot(scaled)
        under = max(0.0, -float(scaled.turning_values.min()))
        under = under if under > ROUNDING * scaled.scale else 0.0
        error = Signal.of(responses.start, responses.length, scaled.values - 1.0, tail)
        if responses.complete:
            settling = error.last_exit(band_percent / 100.0)
            sensitive = error.turns_near_edge(band_percent / 100.0)
    if offset:
        iae: Quantity = "unbounded"
        ise: Quantity = "unbounded"
        itae: Quantity = "unbounded"
    elif responses.complete:
        deviation = Signal.of(
            responses.start,
            responses.length,
            1.0 - responses.pv[SETPOINT],
            _scaled(responses.pv_tails, SETPOINT, -1.0),
        )
        a, b, c, _ = deviation.absolute_integrals()
        iae, ise, itae = a / unit_rad_s, b / unit_rad_s, c / unit_rad_s**2
    else:
        iae = ise = itae = None
    variation: Quantity = None
    if impulse:
        variation = "unbounded"
    elif responses.complete:
        variation = output.total_variation + abs(float(output.values[0, 0]))
    return SetpointStep(
        final_value=final,
        rise_time_s=_seconds(rise, unit_rad_s),
        settling_time_s=_seconds(settling, unit_rad_s),
        settling_time_sensitive=sensitive,
        overshoot_percent=None if over is None else 100.0 * over,
        undershoot_percent=None if under is None else 100.0 * under,
        peak_time_s=_seconds(peak_time, unit_rad_s),
        iae=iae,
        ise=ise,
        itae=itae,
        output_peak="unbounded" if impulse else float(np.abs(output.turning_values).max()),
        output_total_variation=variation,
    )


def load_step(responses: Responses, unit_rad_s: float) -> LoadStep:
    """Metrics of the load response; times in seconds."""
    final = float(responses.final_pv[LOAD])
    tail = _scaled(responses.pv_tails, LOAD, 1.0)
    pv = Signal.of(responses.start, responses.length, responses.pv[LOAD], tail)
    index = int(np.argmax(np.abs(pv.turning_values)))
    peak, peak_time = float(pv.turning_values[index]), float(pv.turning_times[index])
    offset = abs(final) > ROUNDING * max(pv.scale, 1e-300)
    attained: Quantity = peak_time / unit_rad_s
    if offset and abs(peak) <= abs(final) * (1 + ROUNDING):
        # the deviation only grows towards its final value
        peak, attained = final, "unbounded"
    recovery = iae = integrated = None
    if responses.complete:
        about = Signal.of(responses.start, responses.length, responses.pv[LOAD] - final, tail)
        recovery = about.last_exit(RECOVERY_BAND * abs(peak))
        if not offset:
            absolute, _, _, signed = pv.absolute_integrals()
            iae, integrated = absolute / unit_rad_s, -signed / unit_rad_s
    return LoadStep(
        peak_deviation=peak,
        peak_time_s=attained if peak != 0 else None,
        recovery_time_s=_seconds(recovery, unit_rad_s),
        final_value=final if offset else 0.0,
        iae="unbounded" if offset else iae,
        integrated_error="unbounded" if offset else integrated,
    )


def _rise_time(scaled: Signal) -> float | None:
    low, high = scaled.first_passage(0.1), scaled.first_passage(0.9)
    return None if low is None or high is None else high - low


def _overshoot(scaled: Signal) -> tuple[float, float | None]:
    index = int(np.argmax(scaled.turning_values))
    over = float(scaled.turning_values[index]) - 1.0
    if over <= ROUNDING * 10 * scaled.scale:
        return 0.0, None
    return over, float(scaled.turning_times[index])


def _scaled(tails: tuple[Tail, Tail] | None, which: int, factor: float) -> Tail | None:
    if tails is None:
        return None
    return replace(tails[which], amplitude=tails[which].amplitude * factor)


def _seconds(time: float | None, unit_rad_s: float) -> float | None:
    return None if time is None else time / unit_rad_s


def _variation_between(integrals: Reals, row: np.ndarray, place: Reals) -> float:  # type: ignore[type-arg]
    """Σ abs of the integral's changes between the given places, piece by piece."""
    at = chebyshev.evaluate_rows(integrals[row], place)
    count = len(integrals)
    rows = np.concatenate([np.arange(count), row, np.arange(count)])
    places = np.concatenate([np.zeros(count), place, np.ones(count)])
    values = np.concatenate([integrals[:, 0], at, integrals[:, -1]])
    order = np.lexsort((places, rows))
    changes = np.abs(np.diff(values[order]))
    return float(changes[rows[order][1:] == rows[order][:-1]].sum())


def _twice_as_fine() -> Reals:
    return chebyshev.evaluation(NODES, chebyshev.points(2 * NODES))


def _fine_weights() -> Reals:
    """Weights of the integral over [0, 1] on twice the nodes, (2·NODES,)."""
    return chebyshev.integration(2 * NODES)[-1]
