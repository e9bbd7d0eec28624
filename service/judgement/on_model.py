"""Findings on how controller and model are told, and how they fit each other."""

from __future__ import annotations

import sys

from service.judgement.digits import three_digits, time
from service.judgement.finding import Case, Finding

TIME_SCALE_RATIO = 100.0
"""A time of the controller this many times outside those of the model is more often a wrong unit than a wish
(common practice: seconds for minutes are a factor of 60, repeats for times more)."""

_ASSUMED: dict[str, tuple[str, str]] = {
    "derivative_filter": ("derivative filter", "absent"),
    "measurement_filter_s": ("measurement filter", "absent"),
    "setpoint_weight": ("set-point weights", "at their default"),
    "scan": ("scan interval", "absent, the controller as acting all the time"),
}
"""Field that may be "unknown" → its name in words, and how it was taken."""


def not_realisable(case: Case) -> Finding | None:
    """A derivative without any filter."""
    if case.facts.realisable:
        return None
    as_told = (
        "as written no controller can do it, and noise would reach the output without limit. The real "
        "controller has a filter or a scan; find out which and enter it"
    )
    as_scanned = "at each scan the whole jump of the noise reaches the output"
    what = as_scanned if case.recomputation.judged_on == "sampled" else as_told
    return Finding(
        finding="derivative_without_filter",
        weight="caution",
        sentence=f"The derivative has no filter: {what}.",
    )


def settings_unknown(case: Case) -> list[Finding]:
    """Settings that nobody knows; each was taken as absent or at its default."""
    return [_setting_unknown(field) for field in case.facts.assumed]


def _setting_unknown(field: str) -> Finding:
    name, taken = _ASSUMED[field]
    verb = "are" if name.endswith("s") else "is"
    return Finding(
        finding=f"{field.removesuffix('_s')}_unknown",
        weight="caution",
        sentence=f"The {name} {verb} not known and {'were' if verb == 'are' else 'was'} taken as {taken}. "
        "The real loop may behave otherwise: find out, or say in a deviation why it is accepted.",
        needs_deviation=True,
    )


def integral_time_out_of_scale(case: Case) -> Finding | None:
    """Integral time far outside the times of the loop."""
    return _out_of_scale(case, "integral", case.facts.integral_time_s)


def derivative_time_out_of_scale(case: Case) -> Finding | None:
    """Derivative time far above the times of the loop; a short one does no harm."""
    slowest = _times(case)[-1:]
    given = case.facts.derivative_time_s
    if given is None or not slowest or given <= TIME_SCALE_RATIO * slowest[0]:
        return None
    return _out_of_scale(case, "derivative", given)


def _out_of_scale(case: Case, term: str, given_s: float | None) -> Finding | None:
    times = _times(case)
    if given_s is None or not times:
        return None
    if given_s > TIME_SCALE_RATIO * times[-1]:
        ratio, other = given_s / times[-1], f"longer than the slowest of the loop ({time(times[-1])})"
    elif given_s < times[0] / TIME_SCALE_RATIO:
        ratio, other = times[0] / given_s, f"shorter than the fastest of the loop ({time(times[0])})"
    else:
        return None
    # two numbers that float64 holds may have a ratio that it does not
    ratio = min(ratio, sys.float_info.max)
    return Finding(
        finding=f"{term}_time_out_of_scale",
        weight="caution",
        sentence=f"The {term} time of {time(given_s)} is {three_digits(ratio)} times {other}. Check the "
        "units on both sides: seconds, minutes or repeats.",
    )


def _times(case: Case) -> list[float]:
    """Times in s that the controller's are held against, shortest first; empty where there are none."""
    facts = case.facts
    known = (facts.fastest_plant_time_s, facts.slowest_plant_time_s, facts.dead_time_s)
    return sorted(time_s for time_s in (*known, _crossover_time_s(case)) if time_s)


def _crossover_time_s(case: Case) -> float | None:
    """Of a process that integrates the slow time is not in the model: the gain decides it."""
    crossovers = case.judged.crossovers.gain_crossovers if case.judged else ()
    return 1 / crossovers[0].rad_s if case.facts.plant_integrates and crossovers else None


def inverse_response(case: Case) -> Finding | None:
    """Zeros of the plant right of the axis."""
    if not case.facts.plant_zeros_right_of_axis:
        return None
    return Finding(
        finding="inverse_response",
        weight="note",
        sentence="The process answers the wrong way at first (a zero right of the axis): PV moves away "
        "before it follows. More gain cannot cure it.",
    )


def controller_zeros_right_of_axis(case: Case) -> Finding | None:
    """Zeros of the controller right of the axis."""
    if not case.facts.controller_zeros_right_of_axis:
        return None
    return Finding(
        finding="controller_zeros_right_of_axis",
        weight="caution",
        sentence="The controller has a zero right of the axis: it answers a fast change of PV against the "
        "direction in which it answers a slow one. Check the signs of its zeros.",
    )


def does_not_hold_in_manual(case: Case) -> Finding | None:
    """A process that needs the controller to stay where it is."""
    if case.facts.plant_holds_in_manual:
        return None
    what = (
        "is unstable by itself: in manual PV runs away"
        if case.facts.plant_unstable
        else "integrates: in manual PV drifts and does not come to rest"
    )
    return Finding(
        finding="does_not_hold_in_manual",
        weight="caution",
        sentence=f"The process {what}. Agree with the operator how it is held while gains are typed in.",
    )


def dead_time_shortened(case: Case) -> Finding | None:
    """Half of the identification scan was taken off the dead time."""
    facts = case.facts
    if facts.dead_time_negative_by_s > 0:
        return Finding(
            finding="dead_time_shorter_than_half_scan",
            weight="caution",
            sentence="The model's dead time is shorter than half of the scan interval it was found at, by "
            f"{time(facts.dead_time_negative_by_s)}. It was taken as 0; check how the model was found.",
        )
    if facts.dead_time_reduced_by_s <= 0:
        return None
    return Finding(
        finding="dead_time_shortened",
        weight="note",
        sentence=f"The model was found at a scan interval; half of it ({time(facts.dead_time_reduced_by_s)}) "
        f"was taken off its dead time, which leaves {time(facts.dead_time_s)}.",
    )


def equivalents_lacking(case: Case) -> Finding | None:
    """Forms in which these gains cannot be told."""
    lacking = [entry for entry in case.recomputation.equivalent_gains if entry.controller is None]
    if not lacking:
        return None
    forms = "; ".join(f"{entry.form.replace('_', ' ')} ({entry.reason})" for entry in lacking)
    return Finding(
        finding="equivalents_lacking",
        weight="note",
        sentence=f"These gains cannot be told in every form. Without an equivalent: {forms}.",
    )
