"""No parameter of a model is left off the paper."""

from __future__ import annotations

from dataclasses import fields, replace
from typing import get_args

from service.analysis.plant import (
    FrequencyResponse,
    PlantModel,
    SecondOrder,
    StateSpace,
    TransferFunction,
    Uncertainty,
    ZerosPolesGain,
)
from service.sheets import plants
from tests.sheets.records_to_print import LAG

TOLD_IN_WORDS = {"kind", "uncertainty", "frequencies_rad_s", "response"}


def values(plant: PlantModel) -> dict[str, str]:
    return {each.name: each.value for each in plants.told(plant)}


def test_every_field_of_every_kind_has_a_label() -> None:
    named = {field.name for kind in get_args(PlantModel) for field in fields(kind)}
    assert named - TOLD_IN_WORDS == set(plants.LABELS)


def test_numbers_stand_as_they_were_entered() -> None:
    plant = TransferFunction(kind="transfer_function", numerator=(1.25,), denominator=(120.0, 0.1, 1.0))
    told = values(plant)
    assert told["Denominator, highest power first"] == "120, 0.1, 1"
    assert told["Dead time"] == "0"


def test_a_plant_s_gain_is_counted_the_other_way_round_than_a_controller_s() -> None:
    plant = TransferFunction(kind="transfer_function", numerator=(1.25,), denominator=(120.0, 1.0))
    assert values(plant)["Gain is told as"] == "per cent of range over per cent of output"
    in_units = replace(plant, gain_basis="engineering_units")
    assert values(in_units)["Gain is told as"] == "PV units over output units"


def test_a_gain_of_zero_is_not_left_out() -> None:
    assert values(SecondOrder(kind="second_order", gain=0.0, time_constants_s=(1.0, 2.0)))["Gain"] == "0"


def test_roots_are_told_with_both_parts() -> None:
    plant = ZerosPolesGain(
        kind="zeros_poles_gain", zeros_rad_s=(), poles_rad_s=((-1.0, 2.0), (-1.0, -2.0), -0.5), gain=3.0
    )
    assert values(plant)["Poles"] == "−1 + 2j, −1 − 2j, −0.5"
    assert values(plant)["Zeros"] == "none"


def test_what_is_certain_is_told_as_that() -> None:
    told = values(replace(LAG, uncertainty=Uncertainty(gain=(0.8, 1.25))))
    assert told["Uncertainty of gain"] == "factor 0.8 to 1.25"
    assert told["Uncertainty of time constants"] == told["Uncertainty of dead time"] == "certain"
    assert told["Extra dead time"] == "none"
    longer = values(replace(LAG, uncertainty=Uncertainty(dead_time_extra_s=(0.0, 2.5))))
    assert longer["Extra dead time"] == "0 to 2.5"


def test_matrices_are_told_row_by_row() -> None:
    plant = StateSpace(kind="state_space", a=((-1.0, 0.0), (1.0, -2.0)), b=(1.0, 0.0), c=(0.0, 1.0))
    assert values(plant)["A, row by row"] == "-1, 0; 1, -2"


def test_a_measured_response_is_told_by_its_points() -> None:
    plant = FrequencyResponse(
        kind="frequency_response",
        frequencies_rad_s=(0.01, 0.1, 2.5),
        response=((1.0, 0.0), (0.5, -0.5), (0.0, -0.1)),
        unstable_poles=0,
    )
    assert values(plant)["Measured response"] == "3 points from 0.01 to 2.5"
