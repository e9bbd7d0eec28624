"""The check loops as the dataclasses that `recompute` takes, with any time unit they are told in."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from service.analysis.controller import (
    DerivativeFilter,
    DerivativeTime,
    IdealController,
    IntegralTime,
    Proportional,
    SetpointWeight,
)
from service.analysis.plant import FirstOrder, Integrating, PlantModel, SecondOrder, TransferFunction

FOLDER = Path(__file__).parent


@dataclass(frozen=True)
class CheckLoop:
    """One loop with the truth about it, times in seconds."""

    name: str
    family: str
    request: dict[str, Any]
    expected: dict[str, Any]

    def plant_model(self, time_scale: float = 1.0) -> PlantModel:
        """The plant with every time multiplied by `time_scale`."""
        return plant_model(self.request["plant_model"], time_scale)

    def controller(self, time_scale: float = 1.0) -> IdealController:
        """The controller with every time multiplied by `time_scale`."""
        return controller(self.request["controller"], time_scale)


def read(file_name: str) -> list[CheckLoop]:
    """Every loop of one file of check values."""
    entries = json.loads((FOLDER / file_name).read_text())
    return [CheckLoop(entry["id"], entry["family"], entry["request"], entry["expected"]) for entry in entries]


def published() -> dict[str, dict[str, Any]]:
    """The published values by their ids."""
    return {entry["id"]: entry for entry in json.loads((FOLDER / "published.json").read_text())}


def plant_model(document: dict[str, Any], time_scale: float = 1.0) -> PlantModel:
    """The plant of a request, by hand: the check loops use four kinds and no optional field but the lag."""
    scale = time_scale
    dead_time_s = document["dead_time_s"] * scale
    match document["kind"]:
        case "first_order":
            time_constant_s = document["time_constant_s"] * scale
            return FirstOrder(
                kind="first_order",
                gain=document["gain"],
                time_constant_s=time_constant_s,
                dead_time_s=dead_time_s,
            )
        case "second_order":
            return _second_order(document, scale, dead_time_s)
        case "integrating":
            return Integrating(
                kind="integrating",
                gain_per_s=document["gain_per_s"] / scale,
                lag_s=document["lag_s"] * scale,
                dead_time_s=dead_time_s,
            )
        case "transfer_function":
            return TransferFunction(
                kind="transfer_function",
                numerator=_scaled(document["numerator"], scale),
                denominator=_scaled(document["denominator"], scale),
                dead_time_s=dead_time_s,
            )
        case kind:
            raise ValueError(kind)


def controller(document: dict[str, Any], time_scale: float = 1.0) -> IdealController:
    """The controller of a request: all check loops are told in the ideal form, in seconds."""
    derivative, derivative_filter = document["derivative"], document["derivative_filter"]
    return IdealController(
        form="ideal",
        action=document["action"],
        proportional=Proportional(**document["proportional"]),
        integral=IntegralTime(value=document["integral"]["value"] * time_scale, unit="seconds"),
        derivative=derivative and DerivativeTime(value=derivative["value"] * time_scale, unit="seconds"),
        derivative_filter=derivative_filter and DerivativeFilter(**derivative_filter),
        setpoint_weight=SetpointWeight(**document["setpoint_weight"]),
    )


def _second_order(document: dict[str, Any], scale: float, dead_time_s: float) -> SecondOrder:
    if "time_constants_s" in document:
        first, second = document["time_constants_s"]
        return SecondOrder(
            kind="second_order",
            gain=document["gain"],
            time_constants_s=(first * scale, second * scale),
            dead_time_s=dead_time_s,
        )
    return SecondOrder(
        kind="second_order",
        gain=document["gain"],
        natural_frequency_rad_s=document["natural_frequency_rad_s"] / scale,
        damping_ratio=document["damping_ratio"],
        dead_time_s=dead_time_s,
    )


def _scaled(coefficients: list[float], scale: float) -> tuple[float, ...]:
    order = len(coefficients) - 1
    return tuple(value * scale ** (order - index) for index, value in enumerate(coefficients))
