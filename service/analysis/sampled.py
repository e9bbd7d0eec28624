"""The analysis of a loop as it is executed: at its scans, and between them where PV is looked at."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from service.analysis import codes
from service.analysis.controller import Scan
from service.analysis.curves import curves
from service.analysis.errors import WorkBoundError
from service.analysis.frequency import AxisResponse
from service.analysis.loop import ClosedLoopParts, Complexes
from service.analysis.margins import crossovers, margins
from service.analysis.noise import ControlSensitivity, noise
from service.analysis.nyquist import count_right_of_axis
from service.analysis.peaks import Peak, Peaks
from service.analysis.realisation import StateSpace
from service.analysis.results import Analysis, Curves, DominantRoot, Noise, Quantity, Stability
from service.analysis.roots import CharacteristicRoots
from service.analysis.sampled_delay import sampled_delay_margin_s
from service.analysis.sampled_loop import SampledLoop, form_sampled_loop
from service.analysis.sampled_responses import NOISE_PULSE, SPARED_PULSE, Scans, between_scans, scans
from service.analysis.sampled_roots import sampled_roots
from service.analysis.sampled_states import sampled_states
from service.analysis.scan import Scanned
from service.analysis.stability import MAX_DOMINANT_ROOTS, agree, count_hidden, dominant_root, route
from service.analysis.step_metrics import step_metrics

NYQUIST_AT_SCANS = "encirclements of -1 up to the Nyquist frequency, counted from the gain crossovers"
ROOTS_AT_SCANS = "eigenvalues of the closed loop from scan to scan, polished by Newton"

ABSOLUTE_OF_NORMAL = math.sqrt(2.0 / math.pi)
"""Mean magnitude of a normal variable of standard deviation 1."""


def analyse_at_scans(
    parts: ClosedLoopParts,
    space: StateSpace | None,
    scan: Scan,
    settling_band_percent: float,
    with_curves: bool,
) -> tuple[Analysis, Curves | None]:
    """The sampled analysis, and its curves where they are asked for.

    `space`, if there is one, is that of the continuous loop.

    Raises ArithmeticError or LinAlgError where float64 does not carry the numbers.
    """
    scanned = Scanned.of(parts, scan)
    sampled = form_sampled_loop(scanned)
    axis = AxisResponse.of(sampled.loop)
    roots = sampled_roots(
        sampled_states(scanned, sampled.plant, with_spared_noise=False), axis, sampled.hidden_roots
    )
    stability = _stability(sampled, axis, roots)
    listed = crossovers(axis, sampled.rad_s)
    analysis = Analysis(
        stability=stability,
        crossovers=listed,
        margins=None,
        setpoint_step=None,
        load_step=None,
        noise=None,
    )
    if stability.verdict != "stable":
        return analysis, curves(None, axis, sampled.rad_s, parts.unit_rad_s) if with_curves else None
    notes: list[str] = []
    control = ControlSensitivity(sampled.loop, sampled.controller)
    worst_control: Peak | None = None
    try:
        delay_margin_s = sampled_delay_margin_s(sampled, axis)
        if delay_margin_s is None:
            notes.append(codes.DELAY_MARGIN)
        peaks = Peaks.of(axis, control)
        analysis = replace(analysis, margins=margins(axis, listed, peaks, sampled.rad_s, delay_margin_s))
        worst_control = peaks.control
    except WorkBoundError:
        notes.append(codes.MARGINS_TOO_MUCH_WORK)
    states = sampled_states(scanned, sampled.plant, with_spared_noise=True)
    found = scans(states, _log_radius(sampled, roots))
    responses, setpoint, load = None, None, None
    try:
        responses = between_scans(scanned, sampled.plant, found, space)
        setpoint, load = step_metrics(responses, settling_band_percent, parts.unit_rad_s, impulse=False)
    except WorkBoundError:
        notes.append(codes.TOO_SLOW)
    if responses is not None and not responses.complete:
        notes.append(codes.TOO_SLOW)
    amplified = noise(control, worst_control)
    if amplified.max_control_sensitivity is None:
        notes.append(codes.CONTROL_TOO_MUCH_WORK)
    analysis = replace(
        analysis,
        setpoint_step=setpoint,
        load_step=load,
        noise=_noise(sampled, amplified, found),
        notes=tuple(notes),
    )
    return analysis, curves(responses, axis, sampled.rad_s, parts.unit_rad_s) if with_curves else None


def _stability(sampled: SampledLoop, axis: AxisResponse, roots: CharacteristicRoots) -> Stability:
    hidden = count_hidden(sampled.hidden_roots)
    routes = [
        route(NYQUIST_AT_SCANS, count_right_of_axis(axis), hidden),
        route(ROOTS_AT_SCANS, roots.count, hidden),
    ]
    verdict, unstable_roots, reason = agree(routes)
    return Stability(
        verdict=verdict,
        unstable_roots=unstable_roots,
        routes=tuple(routes),
        spectral_radius=_spectral_radius(sampled, roots),
        dominant_roots=_dominant_roots(sampled, roots),
        reason=reason,
    )


def _on_circle(w: Complexes) -> Complexes:
    return np.asarray((1.0 + w) / (1.0 - w))


def _spectral_radius(sampled: SampledLoop, roots: CharacteristicRoots) -> Quantity:
    if roots.count.roots is None:
        return None
    every = np.concatenate([roots.roots, sampled.hidden_roots])
    radius = float(np.abs(_on_circle(every)).max()) if every.size else 0.0
    # a root farther out than 1e16 is w = 1 to float64
    return radius if math.isfinite(radius) else None


def _log_radius(sampled: SampledLoop, roots: CharacteristicRoots) -> float:
    every = np.concatenate([roots.roots, sampled.hidden_roots])
    # ln abs z from w keeps the digits that abs z loses near 1
    squared = 4.0 * every.real / np.abs(1.0 - every) ** 2
    with np.errstate(divide="ignore"):
        return float(0.5 * np.log1p(squared.max(initial=-1.0)))


def _dominant_roots(sampled: SampledLoop, roots: CharacteristicRoots) -> tuple[DominantRoot, ...]:
    """Roots s = ln z/h in rad/s, the slowest to die first; z = 0 is no root in s."""
    hidden = sampled.hidden_roots[sampled.hidden_roots.imag >= 0]
    every = np.concatenate([roots.roots, hidden])
    every = every[(np.abs(1.0 + every) > 1e-12) & (every != 1.0)]
    # ln z = 2·atanh w; a negative z is told above the axis, at the Nyquist frequency
    logs = 2.0 * np.arctanh(every)
    logs = np.where(logs.imag < 0, np.conj(logs), logs)
    s = logs * (sampled.scanned.parts.unit_rad_s / sampled.scanned.interval)
    s = s[np.lexsort((np.abs(s.imag), -s.real))][:MAX_DOMINANT_ROOTS]
    return tuple(dominant_root(complex(root)) for root in s)


def _noise(sampled: SampledLoop, figures: Noise, found: Scans) -> Noise:
    if not found.complete:
        return figures
    pulse, spared = found.output[:, NOISE_PULSE], found.output[:, SPARED_PULSE]
    variance = float(pulse @ pulse)
    moves = np.diff(pulse, prepend=0.0)
    derivative = sampled.scanned.parts.feedback.kd_s != 0
    return replace(
        figures,
        output_std_per_noise_std=math.sqrt(variance),
        output_travel_per_scan=ABSOLUTE_OF_NORMAL * math.sqrt(float(moves @ moves)),
        derivative_share=1.0 - float(spared @ spared) / variance if derivative and variance > 0 else 0.0,
    )
