"""A plant model in words: its kind and every parameter as it was entered."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from service.analysis.plant import FrequencyResponse, PlantModel, Uncertainty
from service.judgement.digits import as_entered
from service.judgement.wording import PLANT_GAIN_BASES, PLANT_KINDS
from service.sheets.controllers import Told, root_as_entered

LABELS = {
    "gain": ("Gain", ""),
    "gain_per_s": ("Gain per second", "1/s"),
    "time_constant_s": ("Time constant", "s"),
    "time_constants_s": ("Time constants", "s"),
    "lead_time_constant_s": ("Lead time constant", "s"),
    "natural_frequency_rad_s": ("Natural frequency", "rad/s"),
    "damping_ratio": ("Damping ratio", ""),
    "lag_s": ("Lag", "s"),
    "numerator": ("Numerator, highest power first", ""),
    "denominator": ("Denominator, highest power first", ""),
    "zeros_rad_s": ("Zeros", "rad/s"),
    "poles_rad_s": ("Poles", "rad/s"),
    "a": ("A, row by row", ""),
    "b": ("B", ""),
    "c": ("C", ""),
    "d": ("D", ""),
    "unstable_poles": ("Unstable poles", ""),
    "poles_at_origin": ("Poles at the origin", ""),
    "dead_time_s": ("Dead time", "s"),
    "gain_basis": ("Gain is told as", ""),
    "identified_through_filter_s": ("Found through a filter of", "s"),
    "identified_at_scan_s": ("Found from data at a scan of", "s"),
}
"""Every parameter with its unit, in the order in which they are told. Points of a measured
response are told by their number, and `uncertainty` in words of its own."""

_ROOTS = {"zeros_rad_s", "poles_rad_s"}
_LEFT_OUT_AT_ZERO = {"identified_through_filter_s", "identified_at_scan_s", "lead_time_constant_s", "lag_s"}


def told(plant: PlantModel) -> tuple[Told, ...]:
    """Kind, parameters and uncertainty."""
    return (
        Told(name="Kind", value=PLANT_KINDS[plant.kind]),
        *_points(plant),
        *_parameters(plant),
        *_uncertainty(plant.uncertainty),
    )


def _parameters(plant: PlantModel) -> Iterator[Told]:
    for field, (name, unit) in LABELS.items():
        value = getattr(plant, field, None)
        if value is None or (value == 0 and field in _LEFT_OUT_AT_ZERO):
            continue
        yield Told(name=name, value=_value(field, value), unit=unit)


def _value(name: str, value: object) -> str:
    if name == "gain_basis":
        return PLANT_GAIN_BASES[str(value)]
    if name in _ROOTS and isinstance(value, tuple):
        return ", ".join(root_as_entered(root) for root in value) or "none"
    return _numbers(value)


def _numbers(value: object) -> str:
    if isinstance(value, tuple):
        parting = "; " if value and isinstance(value[0], tuple) else ", "
        return parting.join(_numbers(each) for each in value)
    return as_entered(float(str(value)))


def _points(plant: PlantModel) -> Iterator[Told]:
    if isinstance(plant, FrequencyResponse):
        low, high = plant.frequencies_rad_s[0], plant.frequencies_rad_s[-1]
        span = f"{len(plant.frequencies_rad_s)} points from {as_entered(low)} to {as_entered(high)}"
        yield Told(name="Measured response", value=span, unit="rad/s")


def _uncertainty(box: Uncertainty | None) -> Iterator[Told]:
    if box is None:
        return
    for name, factors in (
        ("gain", box.gain),
        ("time constants", box.time_constants),
        ("dead time", box.dead_time),
    ):
        known = factors[0] == factors[1] == 1.0
        yield Told(name=f"Uncertainty of {name}", value="certain" if known else f"factor {_range(factors)}")
    if box.dead_time_extra_s[1] > 0:
        yield Told(name="Extra dead time", value=_range(box.dead_time_extra_s), unit="s")
    else:
        yield Told(name="Extra dead time", value="none")


def _range(ends: Sequence[float]) -> str:
    return f"{as_entered(ends[0])} to {as_entered(ends[1])}"
