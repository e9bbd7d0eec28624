"""Margins of a stable loop, each at the root of its own condition on L(jω), never read off a grid.

Definitions. With L the open loop, S = 1/(1+L), T = L/(1+L):
    gain margin              smallest k > 1 with 1 + k·L(jω) = 0 at some ω
    gain reduction margin    largest k < 1 of that kind
    phase margin             least abs(180° + arg L) over all gain crossovers
    delay margin             least (180° + arg L)/ω over all gain crossovers, the phase taken in 0-360°
    maximum sensitivity      sup abs S;   maximum complementary sensitivity   sup abs T
    disk margin              inf 2·abs(1+L)/abs(1−L), symmetric, at most 2
The ends of the axis count as crossings: ω = 0, and infinity where L does not roll off.

Sources: K. J. Åström, T. Hägglund, Advanced PID Control (ISA 2006), sections 4.6 and 7.2, from memory; the
disk margin: P. Seiler, A. Packard, P. Gahinet, An Introduction to Disk Margins, IEEE Control Systems Magazine
40 (2020).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from service.analysis.frequency import LISTED_FACTORS, MAX_LISTED, AxisResponse
from service.analysis.loop import OpenLoop, Reals
from service.analysis.peaks import Peaks
from service.analysis.results import (
    Crossovers,
    GainCrossover,
    Margins,
    PhaseCrossover,
    Quantity,
    Unbounded,
)

InRadS = Callable[[Reals], Reals]
"""From a frequency on the axis, inf included, to rad/s: by a loop's unit or a sampled loop's scale."""


def crossovers(axis: AxisResponse, in_rad_s: InRadS) -> Crossovers:
    """Both lists of crossovers, frequencies in rad/s."""
    at = axis.gain_crossovers
    margin_deg = np.degrees(_signed_phase_margin(axis.loop, at))
    gains = tuple(
        GainCrossover(rad_s=rad_s, phase_margin_deg=margin)
        for rad_s, margin in zip(in_rad_s(at).tolist(), margin_deg.tolist(), strict=True)
    )
    phases, more = _phase_crossovers(axis, in_rad_s)
    return Crossovers(
        gain_crossovers=gains[:MAX_LISTED],
        phase_crossovers=phases[:MAX_LISTED],
        truncated=more or len(gains) > MAX_LISTED or len(phases) > MAX_LISTED,
    )


def margins(
    axis: AxisResponse, listed: Crossovers, peaks: Peaks, in_rad_s: InRadS, delay_margin_s: Quantity
) -> Margins:
    """Every margin of a stable loop."""
    upper, lower = _gain_margins(axis, in_rad_s)
    return Margins(
        gain_margin=upper.factor,
        gain_reduction_margin=lower.factor,
        phase_margin_deg=_phase_margin_deg(axis),
        delay_margin_s=delay_margin_s,
        max_sensitivity=peaks.sensitivity.value,
        max_sensitivity_rad_s=_told_rad_s(
            in_rad_s, math.inf if peaks.sensitivity.omega is None else peaks.sensitivity.omega
        ),
        max_complementary_sensitivity=peaks.complementary.value,
        disk_margin=min(2.0, 1.0 / peaks.disk.value),
        gain_margin_period_s=upper.period_s,
        gain_reduction_margin_period_s=lower.period_s,
        gain_crossovers=listed.gain_crossovers,
        phase_crossovers=listed.phase_crossovers,
        truncated=listed.truncated,
    )


def _signed_phase_margin(loop: OpenLoop, omega: Reals) -> Reals:
    """180° + arg L at gain crossovers in (−π, π], shape of `omega`."""
    beyond = loop.log_response(omega).imag + math.pi
    return np.asarray(-((math.pi - beyond) % (2 * math.pi)) + math.pi)


def _phase_crossovers(axis: AxisResponse, in_rad_s: InRadS) -> tuple[tuple[PhaseCrossover, ...], bool]:
    crossings = axis.phase_crossovers
    low, high = LISTED_FACTORS
    found = [
        PhaseCrossover(rad_s=rad_s, gain_factor=math.exp(-log))
        for rad_s, log in zip(
            in_rad_s(crossings.omega).tolist(), crossings.log_magnitude.tolist(), strict=True
        )
        if math.log(low) <= -log <= math.log(high)
    ]
    at_origin, at_infinity = _factors_at_the_ends(axis.loop)
    if at_origin is not None and low <= at_origin <= high:
        found.insert(0, PhaseCrossover(rad_s=0.0, gain_factor=at_origin))
    if at_infinity is not None and axis.loop.dead_time == 0 and low <= at_infinity <= high:
        found.append(PhaseCrossover(rad_s=_told_rad_s(in_rad_s, math.inf), gain_factor=at_infinity))
    return tuple(found), crossings.truncated


def _factors_at_the_ends(loop: OpenLoop) -> tuple[float | None, float | None]:
    """1/abs L at ω = 0 and ω → ∞ where L is real and negative there (with dead time: any value is
    reached).
    """
    origin = infinity = None
    if loop.order_at_origin == 0 and loop.origin_coefficient < 0:
        origin = 1.0 / -loop.origin_coefficient
    if loop.excess == 0 and loop.sign != 0 and (loop.value_at_infinity < 0 or loop.dead_time > 0):
        infinity = math.exp(-loop.log_gain)
    return origin, infinity


@dataclass(frozen=True, slots=True)
class _GainLimit:
    factor: Quantity
    period_s: Quantity


def _gain_margins(axis: AxisResponse, in_rad_s: InRadS) -> tuple[_GainLimit, _GainLimit]:
    """The factors that destabilise, next above and next below 1, and the period of the oscillation there."""
    crossings = axis.phase_crossovers
    at_origin, at_infinity = _factors_at_the_ends(axis.loop)
    factors = np.exp(-crossings.log_magnitude).tolist()
    omega = crossings.omega.tolist()
    for factor, at in ((at_origin, 0.0), (at_infinity, math.inf)):
        if factor is not None:
            factors.append(factor)
            omega.append(at)
    above = [index for index, factor in enumerate(factors) if factor > 1]
    below = [index for index, factor in enumerate(factors) if factor < 1]
    return (
        _limit(min(above, key=factors.__getitem__, default=None), factors, omega, in_rad_s),
        _limit(max(below, key=factors.__getitem__, default=None), factors, omega, in_rad_s),
    )


def _limit(index: int | None, factors: list[float], omega: list[float], in_rad_s: InRadS) -> _GainLimit:
    if index is None:
        return _GainLimit("unbounded", None)
    rad_s = float(in_rad_s(np.array(omega[index])))
    if math.isinf(rad_s):
        # approached as the frequency grows: there is no period
        return _GainLimit(factors[index], None)
    return _GainLimit(factors[index], 2.0 * math.pi / rad_s if rad_s > 0 else "unbounded")


def _phase_margin_deg(axis: AxisResponse) -> Quantity:
    omega = axis.gain_crossovers
    if not omega.size:
        return "unbounded"
    return math.degrees(float(np.abs(_signed_phase_margin(axis.loop, omega)).min()))


def delay_margin(axis: AxisResponse) -> float:
    """The delay margin of a continuous loop in its own unit of time; inf where there is none."""
    omega = axis.gain_crossovers
    if axis.loop.dead_time == 0 and axis.loop.high_frequency_magnitude >= 1:
        return 0.0
    if not omega.size:
        return math.inf
    margin = _signed_phase_margin(axis.loop, omega)
    return float((np.where(margin > 0, margin, margin + 2 * math.pi) / omega).min())


def _told_rad_s(in_rad_s: InRadS, omega: float) -> float | Unbounded:
    return told(lambda value: float(in_rad_s(np.array(value))), omega)


def told(scale: Callable[[float], float], value: float) -> float | Unbounded:
    """A scaled value, or "unbounded" where it has no limit."""
    scaled = scale(value)
    return scaled if math.isfinite(scaled) else "unbounded"
