"""Limits for a loop, and how a recomputation is held against them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from typing import Annotated, Literal

from annotated_types import Ge

from service.analysis.results import Quantity, Recomputation, WorstCase
from service.judgement.quantities import QUANTITIES, judged, not_stable_at_scan

Limit = Annotated[float, Ge(0)] | None
Outcome = Literal["met", "not_met", "not_assessed"]


@dataclass(frozen=True, kw_only=True, slots=True)
class Criteria:
    """Limits by name, `<quantity>_min` or `<quantity>_max`; None: no such limit.

    The quantities are those of `service.judgement.quantities`; signed ones are limited in magnitude.
    """

    gain_margin_min: Limit = None
    gain_reduction_margin_max: Limit = None
    phase_margin_deg_min: Limit = None
    delay_margin_s_min: Limit = None
    max_sensitivity_max: Limit = None
    max_complementary_sensitivity_max: Limit = None
    disk_margin_min: Limit = None
    decay_rate_per_s_min: Limit = None
    spectral_radius_max: Limit = None
    rise_time_s_max: Limit = None
    settling_time_s_max: Limit = None
    overshoot_percent_max: Limit = None
    undershoot_percent_max: Limit = None
    peak_time_s_max: Limit = None
    iae_max: Limit = None
    ise_max: Limit = None
    itae_max: Limit = None
    output_peak_max: Limit = None
    output_total_variation_max: Limit = None
    peak_deviation_max: Limit = None
    recovery_time_s_max: Limit = None
    load_iae_max: Limit = None
    integrated_error_max: Limit = None
    output_gain_high_frequency_max: Limit = None
    max_control_sensitivity_max: Limit = None
    output_std_per_noise_std_max: Limit = None
    output_travel_per_scan_max: Limit = None
    worst_case_gain_margin_min: Limit = None
    worst_case_phase_margin_deg_min: Limit = None
    worst_case_delay_margin_s_min: Limit = None
    worst_case_max_sensitivity_max: Limit = None
    tolerated_error_scale_min: Limit = None


@dataclass(frozen=True, kw_only=True, slots=True)
class CriterionFinding:
    """One limit, the value held against it, and what came of it."""

    criterion: str
    limit: float
    value: Quantity
    outcome: Outcome
    analysis: Literal["continuous", "sampled"]


SERVICE_FLOORS = Criteria(
    gain_margin_min=2.0,
    gain_reduction_margin_max=0.5,
    phase_margin_deg_min=30.0,
    max_sensitivity_max=2.0,
)
"""The service's own limits where a loop has none (common practice); `service_floors` adds the delay margin's.

Sources: gain margin 2 to 5, phase margin 30 to 60 degrees and maximum sensitivity 1.2 to 2.0 are customary
in Åström and Hägglund, Advanced PID Control (ISA, 2006), section 4.6 (from memory). A reduction margin of 0.5
is the gain margin of 2 in the other direction.
"""

HARD_FLOORS = Criteria(gain_margin_min=1.3, max_sensitivity_max=4.0)
"""Past these no deviation suffices (common practice): a gain margin of 1.3 is used up by a valve or plant
whose gain is 30 per cent higher elsewhere in its range, and a sensitivity of 4 makes some disturbances four
times as large."""

DEAD_TIME_SHARE = 0.25
"""Share of the dead time that the delay margin has at the least (common practice)."""


def judge(recomputation: Recomputation, criteria: Criteria) -> tuple[CriterionFinding, ...]:
    """Hold every limit that is set against the analysis that the loop is judged on, in order of names.

    A value that has no meaning, or was not computed, is `not_assessed`. "unbounded" meets every `_min` and
    the gain reduction margin's `_max`, and fails every other `_max`. What holds over the box of models meets
    a limit only where it is proven, and fails it where the box has an unstable member, or where the loop is
    unstable at its scan, which the box leaves out.
    """
    limits = ((field.name, getattr(criteria, field.name)) for field in fields(criteria))
    return tuple(_judge_one(recomputation, name, limit) for name, limit in limits if limit is not None)


def service_floors(recomputation: Recomputation, scan_interval_s: float | None) -> Criteria:
    """The service's own limits for this loop: SERVICE_FLOORS, and a floor under the delay margin.

    That is a quarter of the dead time, and not below the scan interval (s; None: not scanned) either: one
    late scan must not destabilise the loop.
    """
    delay_margin_s = max(DEAD_TIME_SHARE * recomputation.facts.dead_time_s, scan_interval_s or 0.0)
    return replace(SERVICE_FLOORS, delay_margin_s_min=delay_margin_s if delay_margin_s > 0 else None)


def past_hard_floors(recomputation: Recomputation) -> tuple[CriterionFinding, ...]:
    """The hard floors that this loop does not meet; with one of them no deviation suffices."""
    return tuple(finding for finding in judge(recomputation, HARD_FLOORS) if finding.outcome != "met")


@dataclass(frozen=True, slots=True)
class _Bracket:
    """What is known of a value: it lies between the two. Equal ends: it is known."""

    at_least: Quantity
    at_most: Quantity


def quantity_name(criterion: str) -> str:
    """The quantity that a criterion limits: its name without `_min` or `_max`."""
    return criterion.removesuffix("_min").removesuffix("_max")


def _judge_one(recomputation: Recomputation, criterion: str, limit: float) -> CriterionFinding:
    name = quantity_name(criterion)
    if name in _OVER_THE_BOX:
        return _judge_over_the_box(recomputation, criterion, limit)
    analysis = judged(recomputation)
    value = None if analysis is None else QUANTITIES[name].of(analysis)
    return CriterionFinding(
        criterion=criterion,
        limit=limit,
        value=value,
        outcome=_outcome(criterion, limit, _Bracket(value, value)),
        analysis=recomputation.judged_on,
    )


def _judge_over_the_box(recomputation: Recomputation, criterion: str, limit: float) -> CriterionFinding:
    worst = recomputation.worst_case
    bracket = _Bracket(None, None) if worst is None else _OVER_THE_BOX[quantity_name(criterion)](worst)
    at_scan = not_stable_at_scan(recomputation)
    if at_scan:
        bracket = _Bracket(None, None)
    outcome = _outcome(criterion, limit, bracket)
    unstable_member = worst is not None and (worst.stable_for_all is False or at_scan == "unstable")
    if unstable_member and criterion != "tolerated_error_scale_min":
        outcome = "not_met"
    cautious_end = criterion.endswith("_min") == (outcome != "not_met")
    return CriterionFinding(
        criterion=criterion,
        limit=limit,
        value=bracket.at_least if cautious_end else bracket.at_most,
        outcome=outcome,
        analysis=recomputation.judged_on if worst is None else worst.analysis,
    )


def _outcome(criterion: str, limit: float, bracket: _Bracket) -> Outcome:
    """Met or not met where every value in the bracket says the same, else not assessed."""
    outcomes = {_outcome_at(criterion, limit, end) for end in (bracket.at_least, bracket.at_most)}
    return outcomes.pop() if len(outcomes) == 1 else "not_assessed"


def _outcome_at(criterion: str, limit: float, value: Quantity) -> Outcome:
    if value is None:
        return "not_assessed"
    is_minimum = criterion.endswith("_min")
    if isinstance(value, str):
        return "met" if is_minimum or criterion == "gain_reduction_margin_max" else "not_met"
    if is_minimum:
        return "met" if value >= limit else "not_met"
    return "met" if abs(value) <= limit else "not_met"


def _max_sensitivity(worst: WorstCase) -> _Bracket:
    found = worst.max_sensitivity
    return _Bracket(None, None) if found is None else _Bracket(found.at_least, found.at_most)


def _tolerated_error_scale(worst: WorstCase) -> _Bracket:
    found = worst.tolerated_error_scale
    return _Bracket(None, None) if found is None else _Bracket(found.at_least, found.at_most)


def _proven(field: str) -> Callable[[WorstCase], _Bracket]:
    def read(worst: WorstCase) -> _Bracket:
        value: Quantity = getattr(worst, field) if worst.stable_for_all else None
        return _Bracket(value, value)

    return read


_OVER_THE_BOX: dict[str, Callable[[WorstCase], _Bracket]] = {
    "worst_case_gain_margin": _proven("gain_margin"),
    "worst_case_phase_margin_deg": _proven("phase_margin_deg"),
    "worst_case_delay_margin_s": _proven("delay_margin_s"),
    "worst_case_max_sensitivity": _max_sensitivity,
    "tolerated_error_scale": _tolerated_error_scale,
}
