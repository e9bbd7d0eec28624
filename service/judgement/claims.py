"""What a tuning tool says it found, held against what was recomputed. A claim never enters a verdict."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Literal

from service.analysis.results import Analysis, Quantity, Recomputation, Unbounded
from service.judgement.quantities import QUANTITIES, judged

Claim = float | Unbounded | None
"""A claimed number, or "unbounded"; None where the tool says nothing of it."""

RELATIVE_TOLERANCE = 0.02
ANGLE_TOLERANCE_DEG = 1.0

ROUNDING = 1 + 1e-9
"""2.04 agrees with 2: that the difference of the two is 0.04 and a bit in float64 is no disagreement."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Claims:
    """Claimed quantities by the names of `service.judgement.quantities`."""

    decay_rate_per_s: Claim = None
    spectral_radius: Claim = None
    gain_margin: Claim = None
    gain_reduction_margin: Claim = None
    phase_margin_deg: Claim = None
    delay_margin_s: Claim = None
    max_sensitivity: Claim = None
    max_sensitivity_rad_s: Claim = None
    max_complementary_sensitivity: Claim = None
    disk_margin: Claim = None
    final_value: Claim = None
    rise_time_s: Claim = None
    settling_time_s: Claim = None
    overshoot_percent: Claim = None
    undershoot_percent: Claim = None
    peak_time_s: Claim = None
    iae: Claim = None
    ise: Claim = None
    itae: Claim = None
    output_peak: Claim = None
    output_total_variation: Claim = None
    peak_deviation: Claim = None
    load_peak_time_s: Claim = None
    recovery_time_s: Claim = None
    load_final_value: Claim = None
    load_iae: Claim = None
    integrated_error: Claim = None
    output_gain_high_frequency: Claim = None
    max_control_sensitivity: Claim = None
    output_std_per_noise_std: Claim = None
    output_travel_per_scan: Claim = None
    derivative_share: Claim = None


@dataclass(frozen=True, kw_only=True, slots=True)
class ClaimFinding:
    """One claim beside what was recomputed."""

    name: str
    claimed: float | Unbounded
    recomputed: Quantity
    outcome: Literal["agrees", "differs", "not_comparable"]
    tolerance: str
    """In words: "2 per cent" or "1 degree"."""


def compare(recomputation: Recomputation, claims: Claims) -> tuple[ClaimFinding, ...]:
    """Hold each claim against the analysis that the loop is judged on, in the order of the claims' names."""
    analysis = judged(recomputation)
    given = ((field.name, getattr(claims, field.name)) for field in fields(claims))
    return tuple(_compare_one(analysis, name, claimed) for name, claimed in given if claimed is not None)


def _compare_one(analysis: Analysis | None, name: str, claimed: float | Unbounded) -> ClaimFinding:
    quantity = QUANTITIES[name]
    recomputed = None if analysis is None else quantity.of(analysis)
    in_degrees = quantity.unit == "deg"
    return ClaimFinding(
        name=name,
        claimed=claimed,
        recomputed=recomputed,
        outcome=_outcome(claimed, recomputed, in_degrees, _is_sensitive(analysis, name)),
        tolerance="1 degree" if in_degrees else "2 per cent",
    )


def _outcome(
    claimed: float | Unbounded, recomputed: Quantity, in_degrees: bool, sensitive: bool
) -> Literal["agrees", "differs", "not_comparable"]:
    if recomputed is None or sensitive:
        return "not_comparable"
    if isinstance(claimed, str) or isinstance(recomputed, str):
        return "agrees" if claimed == recomputed else "differs"
    tolerance = ANGLE_TOLERANCE_DEG if in_degrees else RELATIVE_TOLERANCE * abs(recomputed)
    return "agrees" if abs(claimed - recomputed) <= tolerance * ROUNDING else "differs"


def _is_sensitive(analysis: Analysis | None, name: str) -> bool:
    step = analysis.setpoint_step if analysis else None
    return name == "settling_time_s" and step is not None and step.settling_time_sensitive
