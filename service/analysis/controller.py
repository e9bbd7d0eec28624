"""The controller as its gains are entered: four forms, every unit, both actions.

Signs are never in the gains: direction is said by `action` alone. What a form means is written once, in
`service.analysis.terms`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Literal

from annotated_types import Ge, Gt, Len

from service.analysis.errors import FieldError

Unknown = Literal["unknown"]
Action = Literal["reverse", "direct"]
GainBasis = Literal["percent_of_range", "engineering_units"]
Complex = tuple[float, float]
"""A complex number as (real, imaginary)."""

Root = float | Complex
"""A zero or pole as it is entered: a bare number is real."""

ShortText = Annotated[str, Len(0, 80)]

MAX_RECORDED_SETTINGS = 40


@dataclass(frozen=True, kw_only=True, slots=True)
class Proportional:
    """Controller gain, or proportional band in per cent (gain = 100/band). A gain of 0 is an absent term."""

    value: Annotated[float, Ge(0)]
    unit: Literal["gain", "percent_band"]
    displayed: ShortText | None = None

    def __post_init__(self) -> None:
        if self.unit == "percent_band" and self.value == 0:
            raise FieldError(("value",), "a proportional band is greater than 0")


@dataclass(frozen=True, kw_only=True, slots=True)
class IntegralTime:
    """Integral time per repeat, or its reciprocal in repeats; 0 repeats means no integral action."""

    value: Annotated[float, Ge(0)]
    unit: Literal["seconds", "minutes", "repeats_per_second", "repeats_per_minute"]
    displayed: ShortText | None = None

    def __post_init__(self) -> None:
        if self.unit in ("seconds", "minutes") and self.value == 0:
            raise FieldError(
                ("value",), "an integral time is greater than 0; null says that there is no integral action"
            )


@dataclass(frozen=True, kw_only=True, slots=True)
class IntegralGain:
    """Integral gain Ki of the parallel form, or 1/Ki as a time; 0 gain means no integral action."""

    value: Annotated[float, Ge(0)]
    unit: Literal["gain_per_second", "gain_per_minute", "seconds", "minutes", "gain_per_scan"]
    displayed: ShortText | None = None

    def __post_init__(self) -> None:
        if self.unit in ("seconds", "minutes") and self.value == 0:
            raise FieldError(
                ("value",), "an integral time is greater than 0; null says that there is no integral action"
            )


@dataclass(frozen=True, kw_only=True, slots=True)
class DerivativeTime:
    """Derivative time of the ideal and series forms."""

    value: Annotated[float, Gt(0)]
    unit: Literal["seconds", "minutes"]
    displayed: ShortText | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class DerivativeGain:
    """Derivative gain Kd of the parallel form; 0 means no derivative action."""

    value: Annotated[float, Ge(0)]
    unit: Literal["gain_seconds", "gain_minutes", "gain_scans"]
    displayed: ShortText | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class DerivativeFilter:
    """Filter time Tf of the derivative, or the ratio Td/Tf."""

    value: Annotated[float, Gt(0)]
    unit: Literal["seconds", "minutes", "ratio"]
    displayed: ShortText | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class FilterTime:
    """Filter time Tf of the form with two zeros."""

    value: Annotated[float, Gt(0)]
    unit: Literal["seconds", "minutes"]
    displayed: ShortText | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class SetpointWeight:
    """Share of the set point that the proportional (b) and the derivative term (c) see."""

    proportional: float = 1.0
    derivative: float = 0.0


@dataclass(frozen=True, kw_only=True, slots=True)
class Scan:
    """Execution of the controller at a fixed interval, with zero-order hold."""

    interval_s: Annotated[float, Gt(0)]
    method: Literal["backward_difference", "trapezoidal"] = "backward_difference"
    output_delay_s: Annotated[float, Ge(0)] = 0.0


@dataclass(frozen=True, kw_only=True, slots=True)
class RecordedSetting:
    """A setting that is recorded, signed, compared and printed, but not analysed."""

    name: Annotated[str, Len(1, 80)]
    value: float | Annotated[str, Len(0, 200)]
    unit: ShortText = ""


@dataclass(frozen=True, kw_only=True, slots=True)
class _Surroundings:
    """What every form has beside its terms."""

    action: Action
    measurement_filter_s: Annotated[float, Ge(0)] | Unknown = 0.0
    scan: Scan | Unknown | None = None
    gain_basis: GainBasis = "percent_of_range"
    algorithm: Literal["positional", "incremental", "unknown"] = "unknown"
    recorded_settings: Annotated[tuple[RecordedSetting, ...], Len(0, MAX_RECORDED_SETTINGS)] = ()


@dataclass(frozen=True, kw_only=True, slots=True)
class _TimeTerms(_Surroundings):
    proportional: Proportional | None = None
    integral: IntegralTime | None = None
    derivative: DerivativeTime | None = None
    derivative_filter: DerivativeFilter | Unknown | None = None
    setpoint_weight: SetpointWeight | Unknown = field(default_factory=SetpointWeight)

    def __post_init__(self) -> None:
        if self.proportional is not None and self.proportional.value == 0:
            raise FieldError(("proportional", "value"), "a gain of 0 stands only in the parallel form")
        if self.proportional is None and self.integral is None and self.derivative is None:
            raise FieldError((), "a controller has at least one term")
        _check_filter_has_derivative(self.derivative, self.derivative_filter)
        _check_trapezoidal(self.scan, self.derivative, self.derivative_filter)


@dataclass(frozen=True, kw_only=True, slots=True)
class IdealController(_TimeTerms):
    """Kc·(1 + 1/(Ti·s) + Td·s/(1+Tf·s)). `proportional` None: no proportional term, Kc = 1 in the others."""

    form: Literal["ideal"]


@dataclass(frozen=True, kw_only=True, slots=True)
class SeriesController(_TimeTerms):
    """Kc·(1 + 1/(Ti·s))·(1+Td·s)/(1+Tf·s)."""

    form: Literal["series"]

    def __post_init__(self) -> None:
        if self.proportional is None:
            raise FieldError(("proportional",), "the series form has a proportional term")
        _TimeTerms.__post_init__(self)


@dataclass(frozen=True, kw_only=True, slots=True)
class ParallelController(_Surroundings):
    """Kp + Ki/s + Kd·s/(1+Tf·s)."""

    form: Literal["parallel"]
    proportional: Proportional | None = None
    integral: IntegralGain | None = None
    derivative: DerivativeGain | None = None
    derivative_filter: DerivativeFilter | Unknown | None = None
    setpoint_weight: SetpointWeight | Unknown = field(default_factory=SetpointWeight)

    def __post_init__(self) -> None:
        present = [
            term for term in (self.proportional, self.integral, self.derivative) if term and term.value > 0
        ]
        if not present:
            raise FieldError((), "a controller has at least one term other than 0")
        _check_filter_has_derivative(self.derivative, self.derivative_filter)
        _check_trapezoidal(self.scan, self.derivative, self.derivative_filter)
        for name, term in (("integral", self.integral), ("derivative", self.derivative)):
            if term and term.unit in ("gain_per_scan", "gain_scans") and not isinstance(self.scan, Scan):
                raise FieldError((name, "unit"), "a gain for each scan needs the scan interval")
        by_ratio = (
            isinstance(self.derivative_filter, DerivativeFilter) and self.derivative_filter.unit == "ratio"
        )
        if by_ratio and (self.proportional is None or self.proportional.value == 0):
            raise FieldError(
                ("derivative_filter", "unit"), "a ratio to Td = Kd/Kp needs a proportional gain above 0"
            )


@dataclass(frozen=True, kw_only=True, slots=True)
class TwoZerosController(_Surroundings):
    """k·(s−z1)·(s−z2)/(s·(1+Tf·s)), or k·(s−z1)/s with one zero."""

    form: Literal["two_zeros"]
    gain: Annotated[float, Gt(0)]
    zeros_rad_s: Annotated[tuple[Root, ...], Len(1, 2)]
    derivative_filter: FilterTime | Unknown | None = None
    setpoint_weight: SetpointWeight | Unknown = field(default_factory=lambda: SetpointWeight(derivative=1.0))

    def __post_init__(self) -> None:
        check_conjugates(self.zeros_rad_s, "zeros_rad_s")
        derivative = self.zeros_rad_s if len(self.zeros_rad_s) == 2 else None
        _check_filter_has_derivative(derivative, self.derivative_filter)
        _check_trapezoidal(self.scan, derivative, self.derivative_filter)


Controller = IdealController | SeriesController | ParallelController | TwoZerosController


def as_complex(root: Root) -> complex:
    """The entered root as a complex number."""
    return complex(*root) if isinstance(root, tuple) else complex(root)


def check_conjugates(roots: tuple[Root, ...], name: str) -> None:
    """Raise FieldError at the first complex root of `roots` that has no conjugate partner among them."""
    unpaired: list[tuple[complex, int]] = []
    for index, root in enumerate(roots):
        value = as_complex(root)
        if value.imag == 0:
            continue
        partner = next((entry for entry in unpaired if entry[0] == value.conjugate()), None)
        if partner:
            unpaired.remove(partner)
        else:
            unpaired.append((value, index))
    if unpaired:
        raise FieldError((name, unpaired[0][1]), "complex roots come in conjugate pairs")


def _check_filter_has_derivative(derivative: object, derivative_filter: object) -> None:
    # a zero derivative gain is an absent term, but its filter may still stand on the controller's display
    if derivative is None and derivative_filter not in (None, "unknown"):
        raise FieldError(("derivative_filter",), "a derivative filter needs a derivative")


def _check_trapezoidal(scan: object, derivative: object, derivative_filter: object) -> None:
    if (
        isinstance(scan, Scan)
        and scan.method == "trapezoidal"
        and derivative is not None
        and derivative_filter is None
    ):
        raise FieldError(
            ("scan", "method"),
            "the trapezoidal method needs a derivative filter (without one it has a pole at z = -1)",
        )
