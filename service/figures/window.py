"""What part of a response is drawn: long enough to see it settle, short enough to see it move."""

from __future__ import annotations

from collections.abc import Sequence

from service.analysis.results import ResponseCurve
from service.figures import ticks

SETTLED_SHARE = 0.02
"""A response has settled where it stays within this share of its whole excursion."""

ROOM = 1.15
LONGEST_IN_HALF_TIMES = 25.0
"""Past so many half times the movement would be squeezed to the left: the tail is cut, in words."""

LONGEST_EARLIER = 3.0
"""A much slower earlier response is shown for this many times the span of the one that is signed."""

_SPIKE_RATIO = 4.0
_SPIKE_SHARE_OF_TIME = 0.02


def horizon_s(curve: ResponseCurve, earlier: ResponseCurve | None) -> float:
    """The end of the time axis in seconds: a round number in the unit of the axis, never past the curve.

    It depends on two crossings of the response only, and is rounded up, so that almost equal gains are drawn
    over the same time.
    """
    own = _span_s(curve)
    wanted = own if earlier is None else max(own, min(_span_s(earlier), LONGEST_EARLIER * own))
    unit = ticks.time_unit(wanted)
    return min(ticks.round_up(wanted / unit.seconds) * unit.seconds, curve.time_s[-1])


def limits(values: Sequence[float], *, room: float = 0.06) -> tuple[float, float]:
    """Low and high end of an axis that holds all values, with some room; never of no height."""
    low, high = min(values), max(values)
    spread = (high - low) or abs(high) or 1.0
    return low - room * spread, high + room * spread


def with_earlier(values: Sequence[float], earlier: Sequence[float]) -> list[float]:
    """The values, and those of the earlier response as far as they do not shrink the one that is signed."""
    low, high = limits(values, room=0.5)
    return [*values, *(min(max(value, low), high) for value in earlier)]


def shown_until(curve: ResponseCurve, values: Sequence[float], end_s: float) -> list[float]:
    """Those of the curve's values that lie on the chart."""
    return [value for t, value in zip(curve.time_s, values, strict=True) if t <= end_s]


def output_values(curve: ResponseCurve, end_s: float) -> tuple[list[float], bool]:
    """What the output's axis has to hold, and whether a first spike is cut so that the rest can be read."""
    whole = [0.0, *shown_until(curve, curve.output, end_s)]
    times = shown_until(curve, curve.time_s, end_s)
    calm = [0.0, *(u for t, u in zip(times, whole[1:], strict=True) if t >= _SPIKE_SHARE_OF_TIME * end_s)]
    height = max(calm) - min(calm)
    if height == 0 or max(whole) - min(whole) <= _SPIKE_RATIO * height:
        return whole, False
    return [max(min(whole), min(calm) - height), min(max(whole), max(calm) + height), *calm], True


def _span_s(curve: ResponseCurve) -> float:
    rest = curve.pv[-1]
    distances = [abs(pv - rest) for pv in curve.pv]
    excursion = max(distances)
    if excursion == 0:
        return curve.time_s[-1]
    settled = _last_outside(curve.time_s, distances, SETTLED_SHARE * excursion)
    half = _first_inside(curve.time_s, distances, excursion)
    return min(ROOM * settled, LONGEST_IN_HALF_TIMES * half) or curve.time_s[-1]


def _last_outside(time_s: Sequence[float], distances: Sequence[float], band: float) -> float:
    last = max(index for index, distance in enumerate(distances) if distance > band)
    return time_s[min(last + 1, len(time_s) - 1)]


def _first_inside(time_s: Sequence[float], distances: Sequence[float], excursion: float) -> float:
    peak = distances.index(excursion)
    return next(time_s[index] for index in range(peak, len(time_s)) if distances[index] <= excursion / 2)
