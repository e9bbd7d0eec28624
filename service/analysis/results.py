"""What is computed from a loop, as frozen dataclasses. Field names, meanings and units are the interface's.

A quantity is a number; or "unbounded": it exists and has no limit; or None: it has no meaning here. A
frequency or time that is only approached is "unbounded" too. inf and nan never stand in a result.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from service.analysis.controller import Complex

Verdict = Literal["stable", "unstable", "undecided"]
Unbounded = Literal["unbounded"]
Quantity = float | Unbounded | None


@dataclass(frozen=True, kw_only=True, slots=True)
class Route:
    """One method's own answer, with the reason where it has none."""

    method: str
    verdict: Verdict
    unstable_roots: int | Unbounded | None
    reason: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class DominantRoot:
    """A characteristic root in rad/s (of a pair the one above the axis) and its damping ratio."""

    root: float | Complex
    damping_ratio: float


@dataclass(frozen=True, kw_only=True, slots=True)
class Stability:
    """The verdict of one analysis and what it rests on."""

    verdict: Verdict
    unstable_roots: int | Unbounded | None
    routes: tuple[Route, ...]
    decay_rate_per_s: Quantity = None
    spectral_radius: Quantity = None
    dominant_roots: tuple[DominantRoot, ...] = ()
    reason: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class GainCrossover:
    """A frequency where abs L = 1, with the signed phase margin there in (-180, 180]."""

    rad_s: float
    phase_margin_deg: float


@dataclass(frozen=True, kw_only=True, slots=True)
class PhaseCrossover:
    """A frequency where L is real and negative, with the factor that would bring it to -1."""

    rad_s: float | Unbounded
    gain_factor: float


@dataclass(frozen=True, kw_only=True, slots=True)
class Crossovers:
    """Gain and phase crossovers, lowest frequency first; `truncated` where more exist than are listed."""

    gain_crossovers: tuple[GainCrossover, ...]
    phase_crossovers: tuple[PhaseCrossover, ...]
    truncated: bool = False


@dataclass(frozen=True, kw_only=True, slots=True)
class Margins:
    """Distances to instability of a stable loop, with the crossovers that they were read from."""

    gain_margin: Quantity
    gain_reduction_margin: Quantity
    phase_margin_deg: Quantity
    delay_margin_s: Quantity
    max_sensitivity: Quantity
    max_sensitivity_rad_s: Quantity
    max_complementary_sensitivity: Quantity
    disk_margin: Quantity
    gain_margin_period_s: Quantity = None
    """The period at which the loop would oscillate with its gain at the margin; "unbounded": it would drift
    off.
    """
    gain_reduction_margin_period_s: Quantity = None
    gain_crossovers: tuple[GainCrossover, ...] = ()
    phase_crossovers: tuple[PhaseCrossover, ...] = ()
    truncated: bool = False


@dataclass(frozen=True, kw_only=True, slots=True)
class SetpointStep:
    """Metrics of the response to a unit step of the set point at t = 0."""

    final_value: Quantity
    rise_time_s: Quantity
    settling_time_s: Quantity
    settling_time_sensitive: bool
    overshoot_percent: Quantity
    undershoot_percent: Quantity
    peak_time_s: Quantity
    iae: Quantity
    ise: Quantity
    itae: Quantity
    output_peak: Quantity
    output_total_variation: Quantity


@dataclass(frozen=True, kw_only=True, slots=True)
class LoadStep:
    """Metrics of the response to a unit step added to the controller output at t = 0."""

    peak_deviation: Quantity
    peak_time_s: Quantity
    recovery_time_s: Quantity
    final_value: Quantity
    iae: Quantity
    integrated_error: Quantity


@dataclass(frozen=True, kw_only=True, slots=True)
class Noise:
    """How measurement noise reaches the controller output. The last three need a scan."""

    output_gain_high_frequency: Quantity
    max_control_sensitivity: Quantity
    output_std_per_noise_std: Quantity = None
    output_travel_per_scan: Quantity = None
    derivative_share: Quantity = None


@dataclass(frozen=True, kw_only=True, slots=True)
class Analysis:
    """One analysis of a loop; margins and steps are None unless its verdict is stable."""

    stability: Stability
    crossovers: Crossovers
    margins: Margins | None
    setpoint_step: SetpointStep | None
    load_step: LoadStep | None
    noise: Noise | None
    notes: tuple[str, ...] = ()
    """Codes of what could not be computed and why, e.g. "setpoint_response_too_slow"."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Interval:
    """A proven bracket."""

    at_least: float
    at_most: Quantity


@dataclass(frozen=True, kw_only=True, slots=True)
class BoxMember:
    """One member of the box of models, by its factors; the extra dead time is added to the multiplied one."""

    gain: float
    time_constants: float
    dead_time: float
    dead_time_extra_s: float = 0.0


@dataclass(frozen=True, kw_only=True, slots=True)
class WorstCase:
    """What holds over the whole box of models."""

    analysis: Literal["continuous", "sampled"]
    stable_for_all: bool | None
    counterexample: BoxMember | None
    max_sensitivity: Interval | None
    gain_margin: Quantity
    phase_margin_deg: Quantity
    delay_margin_s: Quantity
    tolerated_error_scale: Interval | None
    notes: tuple[str, ...] = ()
    """Codes of what could not be computed and why, as in `Analysis.notes`."""


@dataclass(frozen=True, kw_only=True, slots=True)
class TermValue:
    """One term of a controller in one unit."""

    value: float
    unit: str


@dataclass(frozen=True, kw_only=True, slots=True)
class EquivalentTerms:
    """A controller's terms in one form, each in every unit of that form; empty where a term is absent."""

    proportional: tuple[TermValue, ...] = ()
    integral: tuple[TermValue, ...] = ()
    derivative: tuple[TermValue, ...] = ()
    derivative_filter: tuple[TermValue, ...] = ()
    gain: float | None = None
    zeros_rad_s: tuple[float | Complex, ...] = ()


@dataclass(frozen=True, kw_only=True, slots=True)
class EquivalentGains:
    """The same feedback path in one form; `controller` is None where that form has none, and `reason` says
    why.

    Where the feedback path is the same but the set-point path differs, `reason` says so.
    """

    form: Literal["ideal", "series", "parallel", "two_zeros"]
    controller: EquivalentTerms | None
    reason: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class ResponseCurve:
    """A step response at times that show every turn of it. All tuples have one length."""

    time_s: tuple[float, ...]
    pv: tuple[float, ...]
    output: tuple[float, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class FrequencyCurve:
    """L(jω) and abs S(jω). All tuples have one length."""

    rad_s: tuple[float, ...]
    magnitude: tuple[float, ...]
    phase_deg: tuple[float, ...]
    sensitivity: tuple[float, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class RootsAt:
    """The rightmost characteristic roots in rad/s, of a pair the one above the axis, with a factor on
    something.
    """

    factor: float
    roots: tuple[Complex, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class RootLoci:
    """Dominant roots of the continuous loop against factors on its gain and on its dead time (none without
    it).
    """

    gain: tuple[RootsAt, ...]
    dead_time: tuple[RootsAt, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class Curves:
    """What pages and sheets draw; None where there is nothing to draw."""

    setpoint: ResponseCurve | None
    load: ResponseCurve | None
    frequency: FrequencyCurve | None
    root_loci: RootLoci | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class SecondOpinion:
    """What python-control finds on the same loop by its own means. Never a verdict."""

    library: str
    version: str
    approximation: str | None
    values: dict[str, float | str | None]
    outcome: Literal["agrees", "differs", "not_available"]
    note: str


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopFacts:
    """What the judgement's sentences need to know of the loop itself, computed here once."""

    plant_holds_in_manual: bool
    """The plant alone is stable: it comes to rest in manual."""
    plant_integrates: bool
    plant_unstable: bool
    integral_action: bool
    derivative_action: bool
    derivative_filtered: bool
    realisable: bool
    """The controller's response is proper: no unfiltered derivative."""
    plant_zeros_right_of_axis: int
    controller_zeros_right_of_axis: int
    hidden_roots: tuple[float | Complex, ...]
    """Factors of the controller cancelled by the plant, or the other way round; they count where they lie."""
    stable_with_other_action: bool | None
    """Null where not tried (the loop is stable as entered)."""
    fastest_plant_time_s: float | None
    slowest_plant_time_s: float | None
    integral_time_s: float | None
    derivative_time_s: float | None
    filter_time_s: float | None
    dead_time_s: float
    """As analysed: half of `identified_at_scan_s` is taken off."""
    dead_time_reduced_by_s: float
    dead_time_negative_by_s: float
    """How much of the half interval could not be taken off, since the dead time was shorter."""
    scan_interval_s: float | None = None
    ringing_filters: tuple[tuple[str, float], ...] = ()
    """What is filtered and the filter's time, where the trapezoidal method gives it a pole below 0."""
    assumed: tuple[str, ...] = field(default=())
    """Fields that were "unknown" and analysed as if absent or at their default."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Recomputation:
    """Everything computed from one plant and one controller. Judgement adds findings and claims beside it."""

    verdict: Verdict
    judged_on: Literal["continuous", "sampled"]
    continuous: Analysis
    sampled: Analysis | None
    worst_case: WorstCase | None
    loop_type: int
    equivalent_gains: tuple[EquivalentGains, ...]
    facts: LoopFacts
    not_computed: tuple[Literal["worst_case"], ...] = ()
    curves: Curves | None = None
    second_opinion: SecondOpinion | None = None
