"""The plant model as it is entered: from the controller's output to the measured value (PV).

Dead time is exact wherever it is used, and excludes hold and scan. What a kind means as zeros, poles and gain
is written once, in `service.analysis.rational`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le, Len

from service.analysis.controller import Complex, GainBasis, Root, check_conjugates
from service.analysis.errors import FieldError

MAX_ORDER = 20
"""Highest number of poles of a plant; companion matrices of higher order have no trustworthy roots."""

MAX_FREQUENCY_POINTS = 2000

Coefficients = Annotated[tuple[float, ...], Len(1, MAX_ORDER + 1)]
Roots = Annotated[tuple[Root, ...], Len(0, MAX_ORDER)]
Factor = Annotated[tuple[float, float], Len(2, 2)]


@dataclass(frozen=True, kw_only=True, slots=True)
class Uncertainty:
    """How wrong the model may be: each pair is the lowest and highest factor, 0 < low ≤ 1 ≤ high."""

    gain: Factor = (1.0, 1.0)
    time_constants: Factor = (1.0, 1.0)
    dead_time: Factor = (1.0, 1.0)
    dead_time_extra_s: tuple[float, float] = (0.0, 0.0)

    def __post_init__(self) -> None:
        for name in ("gain", "time_constants", "dead_time"):
            low, high = getattr(self, name)
            if not 0 < low <= 1 <= high:
                raise FieldError((name,), "factors are 0 < low ≤ 1 ≤ high")
        if self.dead_time_extra_s[0] != 0 or self.dead_time_extra_s[1] < 0:
            raise FieldError(("dead_time_extra_s",), "extra dead time runs from 0 to a value of 0 or more")


@dataclass(frozen=True, kw_only=True, slots=True)
class _Surroundings:
    """What every kind has beside its own parameters."""

    dead_time_s: Annotated[float, Ge(0)] = 0.0
    gain_basis: GainBasis = "percent_of_range"
    identified_through_filter_s: Annotated[float, Ge(0)] = 0.0
    identified_at_scan_s: Annotated[float, Ge(0)] = 0.0
    uncertainty: Uncertainty | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class FirstOrder(_Surroundings):
    """K/(1+T·s); a negative time constant is an unstable lag, and `gain` stays P(0)."""

    kind: Literal["first_order"]
    gain: float
    time_constant_s: float

    def __post_init__(self) -> None:
        if self.time_constant_s == 0:
            raise FieldError(("time_constant_s",), "a time constant is not 0")


@dataclass(frozen=True, kw_only=True, slots=True)
class SecondOrder(_Surroundings):
    """K·(1+Tl·s)/((1+T1·s)(1+T2·s)), or natural frequency and damping ratio in place of the time
    constants.
    """

    kind: Literal["second_order"]
    gain: float
    time_constants_s: tuple[float, float] | None = None
    natural_frequency_rad_s: Annotated[float, Gt(0)] | None = None
    damping_ratio: float | None = None
    lead_time_constant_s: float = 0.0

    def __post_init__(self) -> None:
        by_times = self.time_constants_s is not None
        by_frequency = self.natural_frequency_rad_s is not None and self.damping_ratio is not None
        partly = self.natural_frequency_rad_s is not None or self.damping_ratio is not None
        if by_times and partly:
            raise FieldError(
                ("time_constants_s",), "give the time constants, or frequency and damping, not both"
            )
        if not by_times and not by_frequency:
            raise FieldError((), "give time_constants_s, or natural_frequency_rad_s with damping_ratio")
        for index, time_constant_s in enumerate(self.time_constants_s or ()):
            if time_constant_s == 0:
                raise FieldError(("time_constants_s", index), "a time constant is not 0")


@dataclass(frozen=True, kw_only=True, slots=True)
class Integrating(_Surroundings):
    """K/(s·(1+T·s))."""

    kind: Literal["integrating"]
    gain_per_s: float
    lag_s: float = 0.0


@dataclass(frozen=True, kw_only=True, slots=True)
class TransferFunction(_Surroundings):
    """A ratio of polynomials, highest power first."""

    kind: Literal["transfer_function"]
    numerator: Coefficients
    denominator: Coefficients

    def __post_init__(self) -> None:
        if not any(self.numerator):
            raise FieldError(("numerator",), "a numerator has a coefficient other than 0")
        if not any(self.denominator):
            raise FieldError(("denominator",), "a denominator has a coefficient other than 0")
        if _degree(self.numerator) > _degree(self.denominator):
            raise FieldError(("numerator",), "the numerator's order is not above the denominator's")


@dataclass(frozen=True, kw_only=True, slots=True)
class ZerosPolesGain(_Surroundings):
    """k·∏(s−z)/∏(s−p); `gain` is k, not P(0)."""

    kind: Literal["zeros_poles_gain"]
    zeros_rad_s: Roots
    poles_rad_s: Roots
    gain: float

    def __post_init__(self) -> None:
        check_conjugates(self.zeros_rad_s, "zeros_rad_s")
        check_conjugates(self.poles_rad_s, "poles_rad_s")
        if len(self.zeros_rad_s) > len(self.poles_rad_s):
            raise FieldError(("zeros_rad_s",), "there are no more zeros than poles")


@dataclass(frozen=True, kw_only=True, slots=True)
class StateSpace(_Surroundings):
    """One input, one output: ẋ = A·x + B·u, y = C·x + D·u."""

    kind: Literal["state_space"]
    a: Annotated[tuple[tuple[float, ...], ...], Len(1, MAX_ORDER)]
    b: tuple[float, ...]
    c: tuple[float, ...]
    d: float = 0.0

    def __post_init__(self) -> None:
        order = len(self.a)
        for index, row in enumerate(self.a):
            if len(row) != order:
                raise FieldError(("a", index), f"each row of A has {order} entries")
        for name in ("b", "c"):
            if len(getattr(self, name)) != order:
                raise FieldError((name,), f"{name} has {order} entries")


@dataclass(frozen=True, kw_only=True, slots=True)
class FrequencyResponse(_Surroundings):
    """Measured points of P(jω) without the dead time."""

    kind: Literal["frequency_response"]
    frequencies_rad_s: Annotated[tuple[Annotated[float, Gt(0)], ...], Len(2, MAX_FREQUENCY_POINTS)]
    response: Annotated[tuple[Complex, ...], Len(2, MAX_FREQUENCY_POINTS)]
    unstable_poles: Annotated[int, Ge(0), Le(MAX_ORDER)]
    poles_at_origin: Annotated[int, Ge(0), Le(4)] = 0

    def __post_init__(self) -> None:
        if len(self.frequencies_rad_s) != len(self.response):
            raise FieldError(("response",), "there is one response for each frequency")
        for index in range(1, len(self.frequencies_rad_s)):
            if self.frequencies_rad_s[index] <= self.frequencies_rad_s[index - 1]:
                raise FieldError(("frequencies_rad_s", index), "frequencies rise")


PlantModel = (
    FirstOrder
    | SecondOrder
    | Integrating
    | TransferFunction
    | ZerosPolesGain
    | StateSpace
    | FrequencyResponse
)


@dataclass(frozen=True, kw_only=True, slots=True)
class Range:
    """The range of a signal in engineering units."""

    low: float
    high: float
    unit: Annotated[str, Len(0, 40)] = ""

    def __post_init__(self) -> None:
        if not self.high > self.low:
            raise FieldError(("high",), "the high end of a range is above its low end")

    @property
    def span(self) -> float:
        """High minus low, in the range's own unit."""
        return self.high - self.low


@dataclass(frozen=True, kw_only=True, slots=True)
class Ranges:
    """The loop's ranges, by which engineering units become per cent."""

    pv: Range
    output: Range


def _degree(coefficients: tuple[float, ...]) -> int:
    leading = next(index for index, value in enumerate(coefficients) if value != 0)
    return len(coefficients) - 1 - leading
