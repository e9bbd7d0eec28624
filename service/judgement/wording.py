"""Units, forms, actions, verdicts and outcomes in words, one for every name that people meet."""

from __future__ import annotations

from service.analysis.controller import Action
from service.analysis.results import BoxMember, Quantity, Verdict
from service.judgement.criteria import CriterionFinding, Outcome, quantity_name
from service.judgement.digits import as_entered, beside_limit, three_digits
from service.judgement.quantities import QUANTITIES

FORMS: dict[str, str] = {
    "ideal": "ideal (non-interacting: one gain in front of all terms)",
    "series": "series (interacting: derivative and integral one behind the other)",
    "parallel": "parallel (each term with a gain of its own)",
    "two_zeros": "gain with two zeros",
}
FORM_NAMES: dict[str, str] = {
    "ideal": "ideal",
    "series": "series",
    "parallel": "parallel",
    "two_zeros": "two zeros",
}
ACTIONS: dict[Action, str] = {
    "reverse": "reverse: PV up → output down",
    "direct": "direct: PV up → output up",
}
UNITS: dict[str, str] = {
    "gain": "gain",
    "percent_band": "per cent proportional band",
    "seconds": "seconds",
    "minutes": "minutes",
    "repeats_per_second": "repeats per second",
    "repeats_per_minute": "repeats per minute",
    "gain_per_second": "gain per second",
    "gain_per_minute": "gain per minute",
    "gain_per_scan": "gain per scan",
    "gain_seconds": "gain times seconds",
    "gain_minutes": "gain times minutes",
    "gain_scans": "gain times scans",
    "ratio": "ratio of derivative time to filter time",
}
"""Units of the terms of a controller."""

QUANTITY_UNITS: dict[str, str] = {
    "": "",
    "s": "s",
    "1/s": "1/s",
    "rad/s": "rad/s",
    "deg": "°",
    "percent": "%",
}
"""Units of recomputed quantities, as they are printed behind the number."""

PLANT_KINDS: dict[str, str] = {
    "first_order": "first order",
    "second_order": "second order",
    "integrating": "integrating",
    "transfer_function": "transfer function",
    "zeros_poles_gain": "zeros, poles and gain",
    "state_space": "state space",
    "frequency_response": "measured frequency response",
}
GAIN_BASES: dict[str, str] = {
    "percent_of_range": "per cent of output over per cent of range",
    "engineering_units": "output units over PV units",
}
"""What a controller's gain is counted in."""
PLANT_GAIN_BASES: dict[str, str] = {
    "percent_of_range": "per cent of range over per cent of output",
    "engineering_units": "PV units over output units",
}
"""What a plant's gain is counted in: the other way round."""
_SETTINGS: dict[str, str] = {
    "proportional": "Proportional",
    "integral": "Integral",
    "derivative": "Derivative",
    "derivative_filter": "Derivative filter",
    "gain": "Gain k",
    "zeros_rad_s": "Zeros",
    "setpoint_proportional": "Proportional, as the set point sees it",
    "setpoint_derivative": "Derivative, as the set point sees it",
    "setpoint_weight.proportional": "Set-point weight, proportional",
    "setpoint_weight.derivative": "Set-point weight, derivative",
    "action": "Action",
    "measurement_filter_s": "Filter on PV",
    "scan.interval_s": "Scan interval",
    "scan.method": "Scan method",
    "scan.output_delay_s": "Delay of the output",
    "algorithm": "Algorithm",
}
SCAN_METHODS: dict[str, str] = {
    "backward_difference": "backward difference",
    "trapezoidal": "trapezoidal",
}
ALGORITHMS: dict[str, str] = {
    "positional": "positional (the whole output is computed at each scan)",
    "incremental": "incremental (the change of the output is computed at each scan)",
    "unknown": "not known",
}
VERDICTS: dict[Verdict, str] = {
    "stable": "Stable: after a disturbance the loop comes to rest.",
    "unstable": "Unstable: the loop does not come to rest, it swings up or runs away.",
    "undecided": "Undecided: it could not be shown that the loop is stable. Treat it as not stable.",
}
OUTCOMES: dict[Outcome, str] = {"met": "met", "not_met": "not met", "not_assessed": "not assessed"}
WEIGHTS: dict[str, str] = {"stop": "stop", "caution": "caution", "note": "note"}
WORST_CASE_LABELS: dict[str, str] = {
    "worst_case_gain_margin": "gain margin of the worst model within the uncertainty",
    "worst_case_phase_margin_deg": "phase margin of the worst model within the uncertainty",
    "worst_case_delay_margin_s": "delay margin of the worst model within the uncertainty",
    "worst_case_max_sensitivity": "maximum sensitivity of the worst model within the uncertainty",
    "tolerated_error_scale": "scale of model error that is tolerated",
}
_WORST_CASE_UNITS = {"worst_case_phase_margin_deg": "deg", "worst_case_delay_margin_s": "s"}


def setting_name(name: str) -> str:
    """The name of a compared setting in words; one that was recorded only keeps the name it was given."""
    return _SETTINGS.get(name) or name.removeprefix("recorded_settings.")


def quantity_label(name: str) -> str:
    """The name of a quantity of claims and criteria, in words."""
    return WORST_CASE_LABELS.get(name) or QUANTITIES[name].label


def quantity_unit(name: str) -> str:
    """The unit of a quantity as it is printed behind the number; empty where it has none."""
    unit = _WORST_CASE_UNITS.get(name, "") if name in WORST_CASE_LABELS else QUANTITIES[name].unit
    return QUANTITY_UNITS[unit]


def told(name: str, quantity: Quantity) -> str:
    """A recomputed quantity with three digits and its unit: "44.1°", "12.3 s", "without limit"."""
    return with_unit(name, quantity, three_digits(quantity))


def box_member(member: BoxMember) -> str:
    """One model of the box, by its factors: "gain × 1.25, time constants × 0.800, dead time × 1.40"."""
    factors = {
        "gain": member.gain,
        "time constants": member.time_constants,
        "dead time": member.dead_time,
    }
    parts = [f"{name} × {three_digits(factor)}" for name, factor in factors.items()]
    if member.dead_time_extra_s > 0:
        parts.append(f"{three_digits(member.dead_time_extra_s)} s of dead time more")
    return ", ".join(parts)


def criterion_words(criterion: str, limit: float) -> str:
    """A criterion in words: "gain margin at least 2"."""
    name = quantity_name(criterion)
    bound = "at least" if criterion.endswith("_min") else "at most"
    return f"{quantity_label(name)} {bound} {with_unit(name, limit, as_entered(limit))}"


def criterion_sentence(finding: CriterionFinding) -> str:
    """What came of one criterion, in a sentence."""
    name = quantity_name(finding.criterion)
    value = with_unit(name, finding.value, beside_limit(finding.value, finding.limit))
    wanted = criterion_words(finding.criterion, finding.limit)
    return f"{wanted[0].upper()}{wanted[1:]}: {value}, {OUTCOMES[finding.outcome]}."


def with_unit(name: str, quantity: Quantity, number: str) -> str:
    """A quantity as `number` tells it, with its unit behind; none where it is no number."""
    unit = quantity_unit(name)
    if not unit or quantity is None or isinstance(quantity, str):
        return number
    return f"{number}{unit}" if unit == "°" else f"{number} {unit}"
