"""Loops for the tests of the judgement, really recomputed."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    DerivativeTime,
    IdealController,
    IntegralTime,
    Proportional,
    TwoZerosController,
)
from service.analysis.plant import FirstOrder, Integrating, PlantModel, TransferFunction, ZerosPolesGain
from service.analysis.recomputation import recompute
from service.analysis.results import Recomputation

LAG = FirstOrder(kind="first_order", gain=1.2, time_constant_s=30.0, dead_time_s=5.0)
TANK = Integrating(kind="integrating", gain_per_s=0.02, dead_time_s=3.0)
UNSTABLE_LAG = FirstOrder(kind="first_order", gain=-1.0, time_constant_s=-20.0, dead_time_s=1.0)
INVERSE = ZerosPolesGain(kind="zeros_poles_gain", zeros_rad_s=(0.5,), poles_rad_s=(-0.1, -0.2), gain=-0.02)
WASHOUT = TransferFunction(kind="transfer_function", numerator=(2.0, 0.0), denominator=(10.0, 11.0, 1.0))


def ideal(
    gain: float | None = 2.0,
    integral_s: float | None = 40.0,
    derivative_s: float | None = None,
    filter_s: float | None = None,
    **settings: Any,
) -> IdealController:
    return IdealController(
        form="ideal",
        action=settings.pop("action", "reverse"),
        proportional=None if gain is None else Proportional(value=gain, unit="gain"),
        integral=None if integral_s is None else IntegralTime(value=integral_s, unit="seconds"),
        derivative=None if derivative_s is None else DerivativeTime(value=derivative_s, unit="seconds"),
        derivative_filter=None if filter_s is None else DerivativeFilter(value=filter_s, unit="seconds"),
        **settings,
    )


def zeros(*zeros_rad_s: float, gain: float = 0.5) -> TwoZerosController:
    return TwoZerosController(form="two_zeros", action="reverse", gain=gain, zeros_rad_s=zeros_rad_s)


@cache
def recomputed(plant: PlantModel = LAG, controller: Controller = ideal()) -> Recomputation:  # noqa: B008  frozen
    return recompute(plant, controller)


def with_part(recomputation: Recomputation, part: str, **values: Any) -> Recomputation:
    """The recomputation with some values of one part of its continuous analysis replaced."""
    changed = replace(getattr(recomputation.continuous, part), **values)
    return replace(recomputation, continuous=replace(recomputation.continuous, **{part: changed}))
