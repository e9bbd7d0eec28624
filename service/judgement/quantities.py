"""The names by which limits and claims speak of recomputed quantities, and where each one stands.

A name is the interface's own field name. Three fields stand in both step responses (`peak_time_s`, `iae`,
`final_value`): the bare name means the set-point step, and `load_` before it the load step. What holds over
the box of models has `worst_case_` before the name of the margin.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from service.analysis.results import Analysis, Quantity, Recomputation

Unit = Literal["", "s", "1/s", "rad/s", "deg", "percent"]


@dataclass(frozen=True, slots=True)
class Named:
    """A quantity of one analysis: what people call it, its unit, and how it is read (None: not computed)."""

    label: str
    unit: Unit
    of: Callable[[Analysis], Quantity]


def judged(recomputation: Recomputation) -> Analysis | None:
    """The analysis that limits and claims are held against; None where it was asked for and not computed."""
    return recomputation.sampled if recomputation.judged_on == "sampled" else recomputation.continuous


def leaves_scan_out(recomputation: Recomputation) -> bool:
    """The loop is judged at its scans, and its worst case is that of a controller that acts all the time."""
    worst = recomputation.worst_case
    return recomputation.judged_on == "sampled" and worst is not None and worst.analysis == "continuous"


def not_stable_at_scan(recomputation: Recomputation) -> Literal["unstable", "undecided"] | None:
    """The verdict at the scan where it takes away what a worst case without the scan would say; else None."""
    if recomputation.sampled is None or not leaves_scan_out(recomputation):
        return None
    verdict = recomputation.sampled.stability.verdict
    return None if verdict == "stable" else verdict


def _stability(field: str) -> Callable[[Analysis], Quantity]:
    return lambda analysis: _quantity(analysis.stability, field)


def _margin(field: str) -> Callable[[Analysis], Quantity]:
    return lambda analysis: _quantity(analysis.margins, field)


def _setpoint(field: str) -> Callable[[Analysis], Quantity]:
    return lambda analysis: _quantity(analysis.setpoint_step, field)


def _load(field: str) -> Callable[[Analysis], Quantity]:
    return lambda analysis: _quantity(analysis.load_step, field)


def _noise(field: str) -> Callable[[Analysis], Quantity]:
    return lambda analysis: _quantity(analysis.noise, field)


def _quantity(part: object | None, field: str) -> Quantity:
    value: Quantity = None if part is None else getattr(part, field)
    return value


QUANTITIES: dict[str, Named] = {
    "decay_rate_per_s": Named("decay rate", "1/s", _stability("decay_rate_per_s")),
    "spectral_radius": Named("spectral radius", "", _stability("spectral_radius")),
    "gain_margin": Named("gain margin", "", _margin("gain_margin")),
    "gain_reduction_margin": Named("gain reduction margin", "", _margin("gain_reduction_margin")),
    "phase_margin_deg": Named("phase margin", "deg", _margin("phase_margin_deg")),
    "delay_margin_s": Named("delay margin", "s", _margin("delay_margin_s")),
    "max_sensitivity": Named("maximum sensitivity", "", _margin("max_sensitivity")),
    "max_sensitivity_rad_s": Named(
        "frequency of maximum sensitivity", "rad/s", _margin("max_sensitivity_rad_s")
    ),
    "max_complementary_sensitivity": Named(
        "maximum complementary sensitivity", "", _margin("max_complementary_sensitivity")
    ),
    "disk_margin": Named("disk margin", "", _margin("disk_margin")),
    "final_value": Named("final value after a set-point step", "", _setpoint("final_value")),
    "rise_time_s": Named("rise time", "s", _setpoint("rise_time_s")),
    "settling_time_s": Named("settling time", "s", _setpoint("settling_time_s")),
    "overshoot_percent": Named("overshoot", "percent", _setpoint("overshoot_percent")),
    "undershoot_percent": Named("undershoot", "percent", _setpoint("undershoot_percent")),
    "peak_time_s": Named("peak time", "s", _setpoint("peak_time_s")),
    "iae": Named("integral of absolute error after a set-point step", "", _setpoint("iae")),
    "ise": Named("integral of squared error after a set-point step", "", _setpoint("ise")),
    "itae": Named("integral of time-weighted absolute error after a set-point step", "", _setpoint("itae")),
    "output_peak": Named("peak of the output after a set-point step", "", _setpoint("output_peak")),
    "output_total_variation": Named(
        "total variation of the output after a set-point step", "", _setpoint("output_total_variation")
    ),
    "peak_deviation": Named("peak deviation after a load step", "", _load("peak_deviation")),
    "load_peak_time_s": Named("time of the peak deviation after a load step", "s", _load("peak_time_s")),
    "recovery_time_s": Named("recovery time after a load step", "s", _load("recovery_time_s")),
    "load_final_value": Named("final value after a load step", "", _load("final_value")),
    "load_iae": Named("integral of absolute error after a load step", "", _load("iae")),
    "integrated_error": Named("integrated error after a load step", "", _load("integrated_error")),
    "output_gain_high_frequency": Named(
        "gain from noise to output at high frequency", "", _noise("output_gain_high_frequency")
    ),
    "max_control_sensitivity": Named("maximum control sensitivity", "", _noise("max_control_sensitivity")),
    "output_std_per_noise_std": Named(
        "standard deviation of the output for each unit of noise", "", _noise("output_std_per_noise_std")
    ),
    "output_travel_per_scan": Named(
        "output travel a scan for each unit of noise", "", _noise("output_travel_per_scan")
    ),
    "derivative_share": Named("share of the derivative in the output noise", "", _noise("derivative_share")),
}
"""Every quantity that can be limited or claimed, by its name."""
