"""What a chart shows, in words and as a table, for whoever cannot see it."""

from __future__ import annotations

from bisect import bisect_left

from service.analysis.results import FrequencyCurve, LoadStep, Quantity, ResponseCurve, SetpointStep
from service.figures import ticks, window
from service.figures.frequency import title
from service.figures.responses import Response, number
from service.judgement.digits import three_digits

TELLING_PEAK = 1000.0
_NO_SENSITIVITY = (
    " The sensitivity |S| is not drawn: it measures a stable loop only, and this one is not shown to be."
)
ROWS = 11
"""Rows of a table: enough to tell how a response runs, few enough to be read aloud."""


def describe(drawn: Response) -> str:
    """The chart in sentences. Every number in them stands in the stored results."""
    metrics = drawn.metrics
    if isinstance(metrics, SetpointStep):
        about_pv = _describe_setpoint(drawn, metrics)
    else:
        about_pv = _describe_load(metrics)
    low, high = (_told(end(drawn.curve.output)) for end in (min, max))
    output = f"The controller output moves between {low} and {high} % of its range."
    beside = f" Drawn beside it, dashed: the {drawn.earlier_name}." if drawn.earlier else ""
    return f"{drawn.title}, {drawn.name}. {about_pv} {output}{beside}"


def table(response: Response) -> tuple[tuple[str, ...], ...]:
    """Heading and rows of the drawn response at evenly spaced times, read between the stored points."""
    end_s = window.horizon_s(response.curve, response.earlier)
    unit = ticks.time_unit(end_s)
    heading = [f"Time, {unit.name}", "PV, % of range", "Controller output, % of its range"]
    if response.earlier:
        heading.append(f"PV with {response.earlier_name}, % of range")
    times = [end_s * index / (ROWS - 1) for index in range(ROWS)]
    return tuple(heading), *(_row(response, time_s, unit) for time_s in times)


def _row(response: Response, time_s: float, unit: ticks.TimeUnit) -> tuple[str, ...]:
    curve, earlier = response.curve, response.earlier
    values = [time_s / unit.seconds, _at(curve, curve.pv, time_s), _at(curve, curve.output, time_s)]
    if earlier:
        values.append(_at(earlier, earlier.pv, time_s))
    return tuple("" if value is None else _told(value) for value in values)


def _at(curve: ResponseCurve, values: tuple[float, ...], time_s: float) -> float | None:
    """The value at a time, straight between its neighbours; None past the end of what is stored."""
    index = bisect_left(curve.time_s, time_s)
    if index == len(curve.time_s):
        return None
    if index == 0 or curve.time_s[index] == time_s:
        return values[index]
    before, after = curve.time_s[index - 1], curve.time_s[index]
    share = (time_s - before) / (after - before)
    return values[index - 1] + share * (values[index] - values[index - 1])


def _describe_setpoint(response: Response, metrics: SetpointStep) -> str:
    sentences = [_rest(metrics.final_value)]
    overshoot, peak_s = number(metrics.overshoot_percent), number(metrics.peak_time_s)
    if overshoot and peak_s is not None:
        sentences.append(f"It overshoots by {three_digits(overshoot)} % after {three_digits(peak_s)} s.")
    elif overshoot == 0:
        sentences.append("It does not overshoot.")
    if number(metrics.settling_time_s) is not None:
        band = f"±{response.settling_band_percent:g} %"
        sentences.append(f"It stays within {band} after {three_digits(metrics.settling_time_s)} s.")
    return " ".join(sentences)


def _describe_load(metrics: LoadStep) -> str:
    sentences = []
    if number(metrics.peak_deviation) is not None and number(metrics.peak_time_s) is not None:
        peak, after = _told(metrics.peak_deviation), three_digits(metrics.peak_time_s)
        sentences.append(f"PV is driven off by {peak} % of range after {after} s.")
    if number(metrics.recovery_time_s) is not None:
        sentences.append(f"It has recovered after {three_digits(metrics.recovery_time_s)} s.")
    sentences.append(_rest(metrics.final_value))
    return " ".join(sentences)


def describe_frequency(curve: FrequencyCurve, *, stable: bool) -> str:
    """The chart over frequency in sentences; its sensitivity means something for a stable loop only."""
    first, last = three_digits(curve.rad_s[0]), three_digits(curve.rad_s[-1])
    start, end = three_digits(curve.magnitude[0]), three_digits(curve.magnitude[-1])
    return (
        f"{title(stable=stable)}, from {first} to {last} rad/s. The loop gain |L| runs from {start} to {end}."
        f"{_sensitivity_peak(curve) if stable else _NO_SENSITIVITY}"
    )


def _sensitivity_peak(curve: FrequencyCurve) -> str:
    """Nothing for a loop so near the edge that its peak is an accident of the drawn points."""
    peak = max(curve.sensitivity)
    if peak > TELLING_PEAK:
        return ""
    at = three_digits(curve.rad_s[curve.sensitivity.index(peak)])
    return f" The sensitivity |S| is largest near {at} rad/s: {three_digits(peak)} at the drawn points."


def _rest(final_value: Quantity) -> str:
    if number(final_value) is None:
        return "PV comes to no rest that can be stated."
    return f"PV comes to rest at {_told(final_value)} % of range."


def _told(value: Quantity) -> str:
    return three_digits(value).replace("-", "−")  # a true minus sign, as on the axes
