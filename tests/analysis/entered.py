"""Controllers and plants as one would enter them, in few words: gains, and times in seconds."""

from __future__ import annotations

from typing import Any

from service.analysis.controller import (
    DerivativeFilter,
    DerivativeGain,
    DerivativeTime,
    FilterTime,
    IdealController,
    IntegralGain,
    IntegralTime,
    ParallelController,
    Proportional,
    SeriesController,
    TwoZerosController,
)
from service.analysis.plant import FirstOrder, Integrating, SecondOrder, TransferFunction, ZerosPolesGain


def ideal(
    kc: float | None,
    ti: float | None = None,
    td: float | None = None,
    tf: float | None = None,
    action: Any = "reverse",
    **more: Any,
) -> IdealController:
    return IdealController(form="ideal", action=action, **_times(kc, ti, td, tf), **more)


def series(
    kc: float,
    ti: float | None = None,
    td: float | None = None,
    tf: float | None = None,
    action: Any = "reverse",
    **more: Any,
) -> SeriesController:
    return SeriesController(form="series", action=action, **_times(kc, ti, td, tf), **more)


def parallel(
    kp: float, ki: float, kd: float = 0.0, tf: float | None = None, action: Any = "reverse", **more: Any
) -> ParallelController:
    return ParallelController(
        form="parallel",
        action=action,
        proportional=Proportional(value=kp, unit="gain"),
        integral=IntegralGain(value=ki, unit="gain_per_second"),
        derivative=DerivativeGain(value=kd, unit="gain_seconds"),
        derivative_filter=DerivativeFilter(value=tf, unit="seconds") if tf else None,
        **more,
    )


def two_zeros(
    k: float, zeros: tuple[Any, ...], tf: float | None = None, action: Any = "reverse", **more: Any
) -> TwoZerosController:
    return TwoZerosController(
        form="two_zeros",
        action=action,
        gain=k,
        zeros_rad_s=zeros,
        derivative_filter=FilterTime(value=tf, unit="seconds") if tf else None,
        **more,
    )


def first_order(gain: float, time_constant_s: float, dead_time_s: float = 0.0) -> FirstOrder:
    return FirstOrder(kind="first_order", gain=gain, time_constant_s=time_constant_s, dead_time_s=dead_time_s)


def resonant(gain: float, rad_s: float, damping: float, dead_time_s: float = 0.0) -> SecondOrder:
    return SecondOrder(
        kind="second_order",
        gain=gain,
        natural_frequency_rad_s=rad_s,
        damping_ratio=damping,
        dead_time_s=dead_time_s,
    )


def integrating(gain_per_s: float, lag_s: float = 0.0, dead_time_s: float = 0.0) -> Integrating:
    return Integrating(kind="integrating", gain_per_s=gain_per_s, lag_s=lag_s, dead_time_s=dead_time_s)


def ratio(numerator: Any, denominator: Any, dead_time_s: float = 0.0) -> TransferFunction:
    return TransferFunction(
        kind="transfer_function",
        numerator=tuple(map(float, numerator)),
        denominator=tuple(map(float, denominator)),
        dead_time_s=dead_time_s,
    )


def lags(gain: float, times_s: Any, zeros_s: Any = (), dead_time_s: float = 0.0) -> ZerosPolesGain:
    """gain·∏(1+Tz·s)/∏(1+T·s), each time on its own: nothing is multiplied out."""
    leading = gain
    for time_s in zeros_s:
        leading *= time_s
    for time_s in times_s:
        leading /= time_s
    return ZerosPolesGain(
        kind="zeros_poles_gain",
        zeros_rad_s=tuple(-1.0 / time_s for time_s in zeros_s),
        poles_rad_s=tuple(-1.0 / time_s for time_s in times_s),
        gain=leading,
        dead_time_s=dead_time_s,
    )


def factors(gain: float, zeros: Any, poles: Any, dead_time_s: float = 0.0) -> ZerosPolesGain:
    return ZerosPolesGain(
        kind="zeros_poles_gain",
        zeros_rad_s=tuple(zeros),
        poles_rad_s=tuple(poles),
        gain=gain,
        dead_time_s=dead_time_s,
    )


def _times(kc: float | None, ti: float | None, td: float | None, tf: float | None) -> dict[str, Any]:
    return {
        "proportional": None if kc is None else Proportional(value=kc, unit="gain"),
        "integral": None if ti is None else IntegralTime(value=ti, unit="seconds"),
        "derivative": None if td is None else DerivativeTime(value=td, unit="seconds"),
        "derivative_filter": None if tf is None else DerivativeFilter(value=tf, unit="seconds"),
    }
