"""What the service itself finds in a recomputation, each in a sentence that a technician understands.

One function a finding; the tuple below is all of them. A new one is written where its subject stands
(`on_stability`, `on_uncertainty`, `on_scan`, `on_responses`, `on_model`, `on_comparison`) and added here.
"""

from __future__ import annotations

from collections.abc import Callable

from service.analysis.results import Recomputation
from service.judgement import on_comparison, on_model, on_responses, on_scan, on_stability, on_uncertainty
from service.judgement.claims import ClaimFinding
from service.judgement.finding import Case, Finding, Weight

__all__ = ["FINDERS", "Finding", "Weight", "find"]

Finder = Callable[[Case], "Finding | list[Finding] | None"]

FINDERS: tuple[Finder, ...] = (
    on_stability.unstable,
    on_stability.wrong_action,
    on_scan.scan_destabilises,
    on_scan.scan_alone_stabilises,
    on_stability.undecided,
    on_stability.hidden_roots,
    on_uncertainty.unstable_in_the_box,
    on_uncertainty.box_undecided,
    on_uncertainty.worst_case_not_computed,
    on_uncertainty.worst_margins_lacking,
    on_uncertainty.worst_case_without_scan,
    on_model.not_realisable,
    on_scan.scan_takes_phase,
    on_scan.filter_rings,
    on_scan.noise_moves_output,
    on_model.settings_unknown,
    on_model.integral_time_out_of_scale,
    on_model.derivative_time_out_of_scale,
    on_model.controller_zeros_right_of_axis,
    on_model.does_not_hold_in_manual,
    on_responses.gain_reduction,
    on_responses.margins_from_infinite_frequency,
    on_responses.setpoint_offset,
    on_responses.load_offset,
    on_responses.not_computed_parts,
    on_comparison.claims_that_differ,
    on_comparison.second_opinion,
    on_responses.several_gain_crossovers,
    on_responses.crossovers_truncated,
    on_responses.settling_time_sensitive,
    on_responses.loop_type,
    on_model.inverse_response,
    on_model.dead_time_shortened,
    on_model.equivalents_lacking,
)

_ORDER: dict[Weight, int] = {"stop": 0, "caution": 1, "note": 2}


def find(recomputation: Recomputation, claims: tuple[ClaimFinding, ...] = ()) -> tuple[Finding, ...]:
    """Everything found in a recomputation and its compared claims, the heaviest first."""
    case = Case(recomputation, claims)
    found = [finding for finder in FINDERS for finding in _all_of(finder(case))]
    return tuple(sorted(found, key=lambda finding: _ORDER[finding.weight]))


def _all_of(found: Finding | list[Finding] | None) -> list[Finding]:
    if found is None:
        return []
    return found if isinstance(found, list) else [found]
