"""Limits for a loop, and how a recomputation is held against them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal

from annotated_types import Ge

from service.analysis.results import Quantity

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
