"""Curves for pages and sheets, cut so that the transient fills them and every turn shows."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from service.analysis import chebyshev
from service.analysis.frequency import AxisResponse, distinct
from service.analysis.loop import Reals
from service.analysis.responses import LOAD, SETPOINT, Responses
from service.analysis.results import Curves, FrequencyCurve, ResponseCurve

MAX_POINTS = 600
MOST_POINTS = 1200
"""A loop that is scanned often has very many short pieces; no curve has more points than this."""

MAX_POINTS_A_PIECE = 120
"""A loop without dead time may settle within two pieces: with a dozen points its curve would show corners."""

SHOWN_BEYOND = 1.3
"""A curve ends at so many times the time after which it stays within 1 % of its span."""

SHOWN_MAGNITUDES = (1e-2, 1e2)
FREQUENCY_POINTS = 160


def curves(
    responses: Responses | None, axis: AxisResponse, in_rad_s: Callable[[Reals], Reals], unit_rad_s: float
) -> Curves:
    """What is drawn of one loop; times in seconds, frequencies in rad/s. `in_rad_s`: as of the axis."""
    return Curves(
        setpoint=None if responses is None else _response(responses, SETPOINT, unit_rad_s),
        load=None if responses is None else _response(responses, LOAD, unit_rad_s),
        frequency=_frequency(axis, in_rad_s),
    )


def _response(responses: Responses, which: int, unit_rad_s: float) -> ResponseCurve | None:
    """None where a response has left float64."""
    shown = _pieces_shown(responses, which)
    places = _places(shown)
    start, length = responses.start[:shown], responses.length[:shown]
    # the end of a piece and the start of the next are one time, and may differ by their rounding
    times = np.maximum.accumulate((start[:, None] + length[:, None] * places).ravel())
    pv, output = (_at_places(signal[which, :shown], places) for signal in (responses.pv, responses.output))
    if not (np.isfinite(times / unit_rad_s).all() and np.isfinite(pv).all() and np.isfinite(output).all()):
        return None
    keep = np.flatnonzero(_without_repeats(times, pv, output))
    keep = keep[_turns_of_many(pv[keep], output[keep])]
    return ResponseCurve(
        time_s=_floats(times[keep] / unit_rad_s), pv=_floats(pv[keep]), output=_floats(output[keep])
    )


def _at_places(values: Reals, places: Reals) -> Reals:
    """A signal (p, nodes) at places of each piece, in order."""
    if values.shape[1] == 1:
        return np.repeat(values[:, 0], len(places))
    return np.asarray(values @ chebyshev.evaluation(values.shape[1], places).T).ravel()


def _turns_of_many(pv: Reals, output: Reals) -> npt.NDArray[np.intp]:
    """Which of many points stay, so that every turn shows: of each bunch its ends, its least and its
    largest.
    """
    if len(pv) <= MOST_POINTS:
        return np.arange(len(pv))
    kept = set()
    for bunch in np.array_split(np.arange(len(pv)), MOST_POINTS // 6):
        kept |= {int(bunch[0]), int(bunch[-1])}
        for signal in (pv[bunch], output[bunch]):
            kept |= {int(bunch[np.argmin(signal)]), int(bunch[np.argmax(signal)])}
    return np.array(sorted(kept))


def _pieces_shown(responses: Responses, which: int) -> int:
    """How many pieces until PV stays near its end, and a little more."""
    pv = responses.pv[which]
    deviation = np.abs(pv - responses.final_pv[which]).max(axis=1)
    moving = np.flatnonzero(deviation > 0.01 * max(float(np.abs(pv).max()), 1e-300))
    last = int(moving[-1]) if moving.size else 0
    end = SHOWN_BEYOND * float(responses.start[last] + responses.length[last])
    return max(1, int(np.count_nonzero(responses.start < end)))


def _places(pieces: int) -> Reals:
    fewest = 4 if pieces < MOST_POINTS else 2
    count = min(MAX_POINTS_A_PIECE, max(fewest, MAX_POINTS // pieces))
    return np.linspace(0.0, 1.0, count)


def _without_repeats(times: Reals, pv: Reals, output: Reals) -> npt.NDArray[np.bool_]:
    """Which points stay: of two at one time the second goes unless PV or output jump there."""
    same_time = np.diff(times) <= 1e-12 * times[-1]
    scale_pv, scale_output = float(np.abs(pv).max()), float(np.abs(output).max())
    same = (np.abs(np.diff(pv)) <= 1e-9 * scale_pv) & (np.abs(np.diff(output)) <= 1e-9 * scale_output)
    return np.concatenate([[True], ~(same_time & same)])


def _frequency(axis: AxisResponse, in_rad_s: Callable[[Reals], Reals]) -> FrequencyCurve | None:
    magnitude = axis.log_response.real
    low, high = (math.log(bound) for bound in SHOWN_MAGNITUDES)
    shown = np.flatnonzero((magnitude > low) & (magnitude < high))
    if not shown.size:
        return None
    ends = axis.omega[max(shown[0] - 1, 0)], axis.omega[min(shown[-1] + 1, len(axis.omega) - 1)]
    even = np.geomspace(ends[0], ends[1], FREQUENCY_POINTS)
    inside = axis.omega[(axis.omega > ends[0]) & (axis.omega < ends[1])]
    omega = distinct(np.concatenate([even, inside, axis.gain_crossovers]))
    omega = omega[(omega >= ends[0]) & (omega <= ends[1])]
    logs = axis.loop.log_response(omega)
    # a dead time of very many turns has no phase in float64
    told = np.isfinite(logs.real) & np.isfinite(np.degrees(logs.imag))
    if not told.any():
        return None
    omega, logs = omega[told], logs[told]
    response = np.exp(logs)
    return FrequencyCurve(
        rad_s=_floats(in_rad_s(omega)),
        magnitude=_floats(np.abs(response)),
        phase_deg=_floats(np.degrees(logs.imag)),
        sensitivity=_floats(1.0 / np.abs(1.0 + response)),
    )


def _floats(values: Reals) -> tuple[float, ...]:
    return tuple(float(value) for value in values)
