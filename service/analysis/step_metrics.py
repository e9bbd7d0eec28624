"""Metrics of both step responses, each at a root or turning point of the response itself.

Definitions are the interface's: rise time from the first passage of 10 % to that of 90 % of the final value;
settling time the last time outside the band about the final value; overshoot and undershoot from the supremum
and infimum; integrals of SP − PV; the output's travel with its jump at t = 0.
"""

from __future__ import annotations

import numpy as np

from service.analysis.responses import LOAD, SETPOINT, Responses
from service.analysis.results import LoadStep, Quantity, SetpointStep
from service.analysis.signals import ROUNDING, Integrals, Signal, held_signal, integrals, signals, solved
from service.analysis.tails import Tail

RECOVERY_BAND = 0.05
"""Share of the peak deviation within which a load response counts as recovered."""

NO_OVERSHOOT = 10 * ROUNDING
"""Relative to the final value, an overshoot that cannot be told from none."""


def step_metrics(
    responses: Responses, band_percent: float, unit_rad_s: float, *, impulse: bool
) -> tuple[SetpointStep, LoadStep]:
    """Metrics of both responses, times in seconds.

    `impulse`: the output holds an impulse at t = 0, so it has no peak and no travel.
    """
    pv, output, load_pv = _signals(responses)
    final, load_final = float(responses.final_pv[SETPOINT]), float(responses.final_pv[LOAD])
    ended = responses.complete
    meaningful = abs(final) > ROUNDING * max(pv.scale, 1.0)
    # divided by the final value the response ends at 1, whatever its sign
    scaled = pv.times(1.0 / final) if meaningful else None
    band, peak = band_percent / 100.0, load_pv.turning_values[_largest(load_pv)]
    about_final = scaled.less(1.0) if scaled and ended else None
    passages = [
        scaled.first_passage(0.1) if scaled else None,
        scaled.first_passage(0.9) if scaled else None,
        about_final.last_exit(band) if about_final else None,
        load_pv.less(load_final).last_exit(RECOVERY_BAND * max(abs(peak), abs(load_final)))
        if ended
        else None,
    ]
    tenth, nine_tenths, settled, recovered = (_seconds(time, unit_rad_s) for time in solved(passages))
    # PV − SP: of the error only its magnitude is told
    of_error, of_load = integrals([pv.less(1.0), load_pv]) if ended else (None, None)
    setpoint = SetpointStep(
        final_value=final,
        rise_time_s=None if tenth is None or nine_tenths is None else nine_tenths - tenth,
        settling_time_s=settled,
        settling_time_sensitive=about_final is not None and about_final.turns_near_edge(band),
        **_overshoot(scaled, unit_rad_s),
        **_error_integrals(of_error, abs(1.0 - final) > ROUNDING, unit_rad_s),
        output_peak="unbounded" if impulse else output.scale,
        output_total_variation=_travel(output, ended=ended, impulse=impulse),
    )
    return setpoint, _load_step(load_pv, load_final, recovered, of_load, unit_rad_s)


def _signals(responses: Responses) -> list[Signal]:
    """PV and output of the set-point response and PV of the load response."""
    start, length = responses.start, responses.length
    pv_tails: tuple[Tail | None, ...] = responses.pv_tails or (None, None)
    output_tails: tuple[Tail | None, ...] = responses.output_tails or (None, None)
    if responses.output.shape[2] == 1:
        pv, load_pv = signals(start, length, responses.pv, list(pv_tails))
        return [pv, held_signal(start, length, responses.output[SETPOINT, :, 0]), load_pv]
    values = np.array([responses.pv[SETPOINT], responses.output[SETPOINT], responses.pv[LOAD]])
    tails = [pv_tails[SETPOINT], output_tails[SETPOINT], pv_tails[LOAD]]
    return signals(start, length, values, tails)


def _largest(signal: Signal) -> int:
    return int(np.argmax(np.abs(signal.turning_values)))


def _overshoot(scaled: Signal | None, unit_rad_s: float) -> dict[str, float | None]:
    if scaled is None:
        return {"overshoot_percent": None, "undershoot_percent": None, "peak_time_s": None}
    index = int(np.argmax(scaled.turning_values))
    over = float(scaled.turning_values[index]) - 1.0
    under = -float(scaled.turning_values.min())
    overshoots = over > NO_OVERSHOOT * scaled.scale
    return {
        "overshoot_percent": 100.0 * over if overshoots else 0.0,
        "undershoot_percent": 100.0 * under if under > NO_OVERSHOOT * scaled.scale else 0.0,
        "peak_time_s": float(scaled.turning_times[index]) / unit_rad_s if overshoots else None,
    }


def _error_integrals(found: Integrals | None, offset: bool, unit_rad_s: float) -> dict[str, Quantity]:
    if offset:
        return {"iae": "unbounded", "ise": "unbounded", "itae": "unbounded"}
    if found is None:
        return {"iae": None, "ise": None, "itae": None}
    return {
        "iae": found.absolute / unit_rad_s,
        "ise": found.square / unit_rad_s,
        "itae": found.time_weighted / unit_rad_s**2,
    }


def _travel(output: Signal, *, ended: bool, impulse: bool) -> Quantity:
    if impulse:
        return "unbounded"
    return output.total_variation + abs(float(output.values[0, 0])) if ended else None


def _load_step(
    pv: Signal, final: float, recovered: float | None, found: Integrals | None, unit_rad_s: float
) -> LoadStep:
    index = _largest(pv)
    peak = float(pv.turning_values[index])
    offset = abs(final) > ROUNDING * max(pv.scale, 1e-300)
    peak_time: Quantity = float(pv.turning_times[index]) / unit_rad_s
    if offset and abs(peak) <= abs(final) * (1 + ROUNDING):
        # the deviation only grows towards its final value
        peak, peak_time = final, "unbounded"
    return LoadStep(
        peak_deviation=peak,
        peak_time_s=peak_time if peak != 0 else None,
        recovery_time_s=recovered,
        final_value=final if offset else 0.0,
        iae="unbounded" if offset else (found.absolute / unit_rad_s if found else None),
        integrated_error="unbounded" if offset else ((0.0 - found.signed) / unit_rad_s if found else None),
    )


def _seconds(time: float | None, unit_rad_s: float) -> float | None:
    return None if time is None else time / unit_rad_s
