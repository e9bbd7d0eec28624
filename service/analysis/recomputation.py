"""The one door of the mathematics: a plant and a controller in, everything that is computed of them out."""

from __future__ import annotations

from dataclasses import fields, replace
from math import isfinite
from typing import TypeVar

import numpy as np

from service.analysis import codes
from service.analysis.controller import Controller, Scan
from service.analysis.curves import curves
from service.analysis.equivalents import equivalent_gains
from service.analysis.errors import FieldError, WorkBoundError
from service.analysis.facts import facts
from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, ClosedLoopParts, OpenLoop, form_loop
from service.analysis.margins import crossovers, delay_margin, margins, told
from service.analysis.measured_response import count_by_points
from service.analysis.noise import ControlSensitivity, noise
from service.analysis.peaks import Peak, Peaks
from service.analysis.plant import FrequencyResponse, PlantModel, Ranges
from service.analysis.realisation import StateSpace, realise
from service.analysis.responses import Responses, respond
from service.analysis.results import (
    Analysis,
    Crossovers,
    Curves,
    LoadStep,
    Margins,
    Noise,
    Recomputation,
    Route,
    SetpointStep,
    Stability,
    Verdict,
)
from service.analysis.root_loci import root_loci
from service.analysis.sampled import NYQUIST_AT_SCANS, ROOTS_AT_SCANS, analyse_at_scans
from service.analysis.sampled_loop import NotFactoredError
from service.analysis.stability import NYQUIST, ROOTS, decide
from service.analysis.step_metrics import step_metrics
from service.analysis.worst_case import worst_case

POINTS_AT_SCANS = "a plant that is known by points of its frequency response is not analysed at the scans"
BEYOND_FLOAT64 = "the loop's numbers leave the range of float64"


def recompute(
    plant_model: PlantModel,
    controller: Controller,
    *,
    ranges: Ranges | None = None,
    settling_band_percent: float = 2.0,
    with_curves: bool = False,
    with_second_opinion: bool = False,
) -> Recomputation:
    """Recompute stability, margins, step metrics and noise of one loop.

    Raises FieldError, its path starting with "plant_model", "controller" or "ranges", where the loop cannot
    be formed: ranges missing for engineering units, an ill-posed loop, a plant kind that is not analysed.
    """
    # zeros and poles on the axis, and what lies beyond float64, show as inf and nan on the way and are met
    # there
    with np.errstate(all="ignore"):
        parts = form_loop(plant_model, controller, ranges)
        _refuse_ill_posed(parts.loop)
        result = _recompute(parts, plant_model, controller, ranges, settling_band_percent, with_curves)
    if not with_second_opinion:
        return result
    # python-control takes longer to import than everything else together, so only who asks for it waits
    from service.analysis.second_opinion import second_opinion  # noqa: PLC0415

    scan = controller.scan if isinstance(controller.scan, Scan) else None
    opinion = second_opinion(parts, scan, result.sampled or result.continuous, settling_band_percent)
    return replace(result, second_opinion=opinion)


def _recompute(
    parts: ClosedLoopParts,
    plant_model: PlantModel,
    controller: Controller,
    ranges: Ranges | None,
    settling_band_percent: float,
    with_curves: bool,
) -> Recomputation:
    try:
        space = realise(parts)
        continuous, drawn = _continuous(parts, space, plant_model, settling_band_percent, with_curves)
        _refuse_overflown(continuous)
    except (ArithmeticError, np.linalg.LinAlgError):
        space, continuous, drawn = None, _undecided((NYQUIST, ROOTS), BEYOND_FLOAT64), None
    sampled = None
    if isinstance(controller.scan, Scan):
        if isinstance(plant_model, FrequencyResponse):
            sampled = _undecided((NYQUIST_AT_SCANS, ROOTS_AT_SCANS), POINTS_AT_SCANS)
        else:
            sampled, drawn = _sampled(parts, space, controller.scan, settling_band_percent, with_curves)
    if drawn is not None:
        drawn = replace(drawn, root_loci=root_loci(parts, space))
    worst = worst_case(parts, plant_model, controller, ranges, continuous)
    return Recomputation(
        verdict=_of_all(continuous, sampled),
        judged_on="sampled" if sampled else "continuous",
        continuous=continuous,
        sampled=sampled,
        worst_case=worst,
        loop_type=max(0, parts.loop.order_at_origin),
        equivalent_gains=equivalent_gains(controller),
        facts=facts(parts, space, controller, continuous.stability.verdict),
        not_computed=("worst_case",) if plant_model.uncertainty is not None and worst is None else (),
        curves=drawn,
    )


def _of_all(continuous: Analysis, sampled: Analysis | None) -> Verdict:
    """Stable only where every analysis is; unstable where one is."""
    verdicts = {analysis.stability.verdict for analysis in (continuous, sampled) if analysis is not None}
    if "unstable" in verdicts:
        return "unstable"
    return "undecided" if "undecided" in verdicts else "stable"


def _sampled(
    parts: ClosedLoopParts,
    space: StateSpace | None,
    scan: Scan,
    settling_band_percent: float,
    with_curves: bool,
) -> tuple[Analysis, Curves | None]:
    try:
        analysis, drawn = analyse_at_scans(parts, space, scan, settling_band_percent, with_curves)
        _refuse_overflown(analysis)
    except NotFactoredError as error:
        return _undecided((NYQUIST_AT_SCANS, ROOTS_AT_SCANS), str(error)), None
    except (ArithmeticError, np.linalg.LinAlgError):
        return _undecided((NYQUIST_AT_SCANS, ROOTS_AT_SCANS), BEYOND_FLOAT64), None
    notes = list(analysis.notes)
    finite = replace(
        analysis,
        margins=_finite(analysis.margins, notes),
        setpoint_step=_finite(analysis.setpoint_step, notes),
        load_step=_finite(analysis.load_step, notes),
        noise=_finite(analysis.noise, notes),
    )
    return replace(finite, notes=tuple(notes)), drawn


def _continuous(
    parts: ClosedLoopParts,
    space: StateSpace | None,
    plant_model: PlantModel,
    settling_band_percent: float,
    with_curves: bool,
) -> tuple[Analysis, Curves | None]:
    unit = parts.unit_rad_s
    axis = AxisResponse.of(parts.loop)
    measured = count_by_points(plant_model, parts) if isinstance(plant_model, FrequencyResponse) else None
    decided = decide(parts, space, axis, measured)
    listed = crossovers(axis, parts.in_rad_s)
    stability = decided.stability
    if stability.verdict != "stable":
        analysis = Analysis(
            stability=stability,
            crossovers=listed,
            margins=None,
            setpoint_step=None,
            load_step=None,
            noise=None,
        )
        return analysis, curves(None, axis, parts.in_rad_s, unit) if with_curves else None
    notes: list[str] = []
    control = ControlSensitivity(parts.loop, parts.filtered_controller)
    found_margins: Margins | None = None
    worst_control: Peak | None = None
    try:
        peaks = Peaks.of(axis, control)
        delay_margin_s = told(lambda delay: delay / unit, delay_margin(axis))
        found_margins = margins(axis, listed, peaks, parts.in_rad_s, delay_margin_s)
        worst_control = peaks.control
    except WorkBoundError:
        notes.append(codes.MARGINS_TOO_MUCH_WORK)
    responses = None
    if measured is not None:
        notes.append(codes.FROM_POINTS)
    elif space is None:
        notes.append(codes.NOT_REALISABLE)
    else:
        try:
            responses = respond(parts, space, decided.roots)
        except WorkBoundError:
            notes.append(codes.TOO_SLOW)
    setpoint, load = _steps(space, responses, settling_band_percent, unit, notes)
    amplified = noise(control, worst_control)
    if amplified.max_control_sensitivity is None:
        notes.append(codes.CONTROL_TOO_MUCH_WORK)
    analysis = Analysis(
        stability=stability,
        crossovers=listed,
        margins=_finite(found_margins, notes),
        setpoint_step=_finite(setpoint, notes),
        load_step=_finite(load, notes),
        noise=_finite(amplified, notes),
        notes=tuple(notes),
    )
    return analysis, curves(responses, axis, parts.in_rad_s, unit) if with_curves else None


def _steps(
    space: StateSpace | None, responses: Responses | None, band_percent: float, unit: float, notes: list[str]
) -> tuple[SetpointStep | None, LoadStep | None]:
    if space is None or responses is None:
        return None, None
    if not responses.complete:
        notes.append(codes.TOO_SLOW)
    impulse = space.setpoint_impulse != 0
    if impulse:
        notes.append(codes.IMPULSE)
    setpoint, load = step_metrics(responses, band_percent, unit, impulse=impulse)
    # an impulse of the output that the plant passes at once leaves PV without a response in time
    return (None if impulse and space.d_y != 0 else setpoint), load


def _refuse_overflown(analysis: Analysis) -> None:
    """Raises OverflowError where a root or a crossover of the analysis lies beyond float64 in rad/s."""
    stability, listed = analysis.stability, analysis.crossovers
    numbers: list[object] = [stability.decay_rate_per_s]
    for root in stability.dominant_roots:
        numbers += [*(root.root if isinstance(root.root, tuple) else (root.root,)), root.damping_ratio]
    for gain in listed.gain_crossovers:
        numbers += [gain.rad_s, gain.phase_margin_deg]
    for phase in listed.phase_crossovers:
        numbers += [phase.rad_s, phase.gain_factor]
    if any(isinstance(number, float) and not isfinite(number) for number in numbers):
        raise OverflowError


Part = TypeVar("Part", Margins, SetpointStep, LoadStep, Noise)

_NAMES: dict[type, tuple[str, ...]] = {
    part: tuple(field.name for field in fields(part)) for part in (Margins, SetpointStep, LoadStep, Noise)
}


def _finite(part: Part | None, notes: list[str]) -> Part | None:
    """The part with None in place of every number that has left float64, and a note where there was one."""
    if part is None:
        return None
    values = {name: getattr(part, name) for name in _NAMES[type(part)]}
    lost = [name for name, value in values.items() if isinstance(value, float) and not isfinite(value)]
    if not lost:
        return part
    if codes.NUMBERS not in notes:
        notes.append(codes.NUMBERS)
    values.update(dict.fromkeys(lost))
    return type(part)(**values)


def _undecided(methods: tuple[str, str], reason: str) -> Analysis:
    routes = tuple(
        Route(method=method, verdict="undecided", unstable_roots=None, reason=reason) for method in methods
    )
    return Analysis(
        stability=Stability(verdict="undecided", unstable_roots=None, routes=routes, reason=reason),
        crossovers=Crossovers(gain_crossovers=(), phase_crossovers=()),
        margins=None,
        setpoint_step=None,
        load_step=None,
        noise=None,
        notes=(codes.NUMBERS,),
    )


def _refuse_ill_posed(loop: OpenLoop) -> None:
    if loop.dead_time > 0 or loop.excess != 0 or loop.sign == 0:
        return
    # without dead time 1 + L(∞) = 0 leaves an equation without a solution at every instant
    if abs(1.0 + loop.sign * np.exp(loop.log_gain)) <= 64 * EPSILON:
        raise FieldError((), "the loop is ill-posed: without dead time its gain at infinite frequency is -1")
