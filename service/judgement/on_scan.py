"""Findings on the loop as it is scanned, and on the noise that its output carries."""

from __future__ import annotations

from service.analysis.results import Analysis
from service.judgement.digits import three_digits, time
from service.judgement.finding import Case, Finding

PHASE_SHARE = 0.2
"""Share of the phase margin that the scan may take before it is told; common practice."""

TRAVEL_MAX = 5.0
"""Mean move of the output a scan for each unit of noise from which a valve wears; common practice."""

HIGH_FREQUENCY_GAIN_MAX = 20.0
"""The same for a controller whose scan is not given, as its gain at high frequency; common practice."""

DERIVATIVE_MOST = 0.5


def scan_destabilises(case: Case) -> Finding | None:
    """Stable in continuous time and not at the scan interval."""
    if _verdicts(case) != ("stable", "unstable"):
        return None
    return Finding(
        finding="scan_destabilises",
        weight="stop",
        sentence="A controller that acts all the time would be stable with these gains; at this scan "
        "interval the loop is unstable. The scan is too slow for them.",
    )


def scan_alone_stabilises(case: Case) -> Finding | None:
    """Unstable in continuous time and stable at the scan interval."""
    if _verdicts(case) != ("unstable", "stable"):
        return None
    return Finding(
        finding="scan_alone_stabilises",
        weight="stop",
        sentence="At exactly this scan interval the loop would be stable; a controller that acts all the "
        "time would not be with these gains. Another scan interval may make it unstable.",
    )


def scan_takes_phase(case: Case) -> Finding | None:
    """The scan takes more than a stated share of the phase margin."""
    sampled = case.recomputation.sampled
    with_scan, without = _phase_margin(sampled), _phase_margin(case.recomputation.continuous)
    if with_scan is None or without is None or with_scan >= (1 - PHASE_SHARE) * without:
        return None
    return Finding(
        finding="scan_takes_phase",
        weight="caution",
        sentence=f"The scan interval ({time(case.facts.scan_interval_s)}) takes "
        f"{three_digits(without - with_scan)}° of the {three_digits(without)}° of phase margin that a "
        f"controller acting all the time would have. More than {PHASE_SHARE:.0%} is much (common practice): "
        "the loop is scanned slowly for these gains.",
    )


def filter_rings(case: Case) -> list[Finding]:
    """Filter times below half a scan, which the trapezoidal method makes ring."""
    return [
        Finding(
            finding="filter_rings_at_scan",
            weight="caution",
            sentence=f"The filter time of the {of} ({time(filter_time_s)}) is below half a scan "
            f"({time(case.facts.scan_interval_s)}). With the trapezoidal method such a filter rings: its "
            "output goes up and down from scan to scan.",
        )
        for of, filter_time_s in case.facts.ringing_filters
    ]


def noise_moves_output(case: Case) -> Finding | None:
    """The gains multiply measurement noise so much that a valve would wear."""
    noise = case.judged.noise if case.judged else None
    if noise is None:
        return None
    travel, high = noise.output_travel_per_scan, noise.output_gain_high_frequency
    if isinstance(travel, float):
        if travel <= TRAVEL_MAX:
            return None
        moves = (
            f"Each 1 % of noise on PV moves the output by {three_digits(travel)} % a scan, "
            f"on average{_by_derivative(noise.derivative_share)}. More than {TRAVEL_MAX:g} %"
        )
    elif case.recomputation.judged_on == "continuous" and isinstance(high, float):
        if high <= HIGH_FREQUENCY_GAIN_MAX:
            return None
        moves = (
            f"Fast noise on PV comes out {three_digits(high)} times as large. More than "
            f"{HIGH_FREQUENCY_GAIN_MAX:g} times"
        )
    else:
        return None
    return Finding(
        finding="noise_moves_output",
        weight="caution",
        sentence=f"{moves} wears a valve (common practice). Look at the noise on PV before these gains are "
        "left in automatic.",
    )


def _by_derivative(share: object) -> str:
    if not isinstance(share, float) or share < DERIVATIVE_MOST:
        return ""
    return f"; {min(share, 1.0):.0%} of that noise comes through the derivative"


def _verdicts(case: Case) -> tuple[str, str] | None:
    sampled = case.recomputation.sampled
    if sampled is None:
        return None
    return case.recomputation.continuous.stability.verdict, sampled.stability.verdict


def _phase_margin(analysis: Analysis | None) -> float | None:
    margins = analysis.margins if analysis else None
    value = margins.phase_margin_deg if margins else None
    return value if isinstance(value, float) else None
