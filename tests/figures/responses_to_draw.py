"""Stored responses in closed form: second-order ones, whose times and peaks a book gives."""

from __future__ import annotations

import math

from service.analysis.results import FrequencyCurve, LoadStep, ResponseCurve, SetpointStep
from service.figures.responses import Response


def second_order(damping: float, natural_rad_s: float, end_s: float, *, kick: float = 2.0) -> ResponseCurve:
    """Unit step of ω²/(s² + 2ζωs + ω²), with an output that starts at `kick` and ends at 0.5."""
    damped = natural_rad_s * math.sqrt(1 - damping**2)
    times = [end_s * index / 2000 for index in range(2001)]
    decay = [math.exp(-damping * natural_rad_s * t) for t in times]
    slope = damping / math.sqrt(1 - damping**2)
    pv = [
        1 - d * (math.cos(damped * t) + slope * math.sin(damped * t))
        for t, d in zip(times, decay, strict=True)
    ]
    output = [0.5 + (kick - 0.5) * d * math.cos(damped * t) for t, d in zip(times, decay, strict=True)]
    return ResponseCurve(time_s=tuple(times), pv=tuple(pv), output=tuple(output))


def creeping(end_s: float) -> ResponseCurve:
    """Nine tenths of the way within seconds, the rest over an hour."""
    times = [end_s * (index / 2000) ** 2 for index in range(2001)]
    pv = [1 - 0.9 * math.exp(-t / 5) - 0.1 * math.exp(-t / 2000) for t in times]
    return ResponseCurve(time_s=tuple(times), pv=tuple(pv), output=tuple(1.0 for _ in times))


def setpoint_metrics(**changed: object) -> SetpointStep:
    known = {
        "final_value": 1.0,
        "rise_time_s": 14.6,
        "settling_time_s": 84.1,
        "settling_time_sensitive": False,
        "overshoot_percent": 25.4,
        "undershoot_percent": 0.0,
        "peak_time_s": 34.3,
        "iae": 19.8,
        "ise": 10.5,
        "itae": 310.0,
        "output_peak": 2.0,
        "output_total_variation": 3.4,
    }
    return SetpointStep(**(known | changed))


def load_metrics(**changed: object) -> LoadStep:
    known = {
        "peak_deviation": 0.61,
        "peak_time_s": 22.0,
        "recovery_time_s": 90.0,
        "final_value": 0.0,
        "iae": 21.0,
        "integrated_error": -20.0,
    }
    return LoadStep(**(known | changed))


def load_curve(end_s: float = 400.0) -> ResponseCurve:
    times = [end_s * index / 1000 for index in range(1001)]
    pv = [math.exp(-t / 40) - math.exp(-t / 12) for t in times]
    output = [-1 + math.exp(-t / 40) for t in times]
    return ResponseCurve(time_s=tuple(times), pv=tuple(pv), output=tuple(output))


def setpoint(*, earlier: bool = False, **changed: object) -> Response:
    return Response(
        step="setpoint",
        curve=second_order(0.4, 0.1, 600.0),
        metrics=setpoint_metrics(**changed),
        earlier=second_order(0.2, 0.06, 900.0, kick=1.2) if earlier else None,
    )


def load() -> Response:
    return Response(step="load", curve=load_curve(), metrics=load_metrics())


def frequency() -> FrequencyCurve:
    """L = 0.5/(s(10s + 1))."""
    rad_s = [10 ** (-3 + 5 * index / 400) for index in range(401)]
    loop = [0.5 / (1j * w * (10j * w + 1)) for w in rad_s]
    return FrequencyCurve(
        rad_s=tuple(rad_s),
        magnitude=tuple(abs(value) for value in loop),
        phase_deg=tuple(math.degrees(math.atan2(value.imag, value.real)) for value in loop),
        sensitivity=tuple(abs(1 / (1 + value)) for value in loop),
    )
