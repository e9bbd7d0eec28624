"""Numbers that no honest loop has: refused with their place, or answered rightly, and nothing else."""

from __future__ import annotations

import json
import math
from typing import Any

import pytest

from service.documents.errors import InvalidDocument
from service.documents.recomputations import answer
from service.documents.writing import to_bytes
from tests.documents.requests import REQUEST, accepted, changed, refused_at

MANY = [1.0] * 1001

REFUSED: list[tuple[str, object]] = [
    ("/plant_model/time_constant_s", 0),
    ("/plant_model/dead_time_s", -1e-9),
    ("/plant_model/identified_at_scan_s", -1.0),
    ("/plant_model/uncertainty", {"gain": [0.0, 1.0]}),
    ("/plant_model/uncertainty", {"gain": [1.1, 1.2]}),
    ("/plant_model/uncertainty", {"dead_time_extra_s": [0, -1]}),
    ("/controller/proportional/value", -2.0),
    ("/controller/proportional/value", 0),
    ("/controller/integral/value", 0),
    ("/controller/integral/value", -40),
    ("/controller/derivative/value", 0),
    ("/controller/derivative/value", -1),
    ("/controller/derivative_filter/value", 0),
    ("/controller/measurement_filter_s", -0.5),
    ("/controller/scan", {"interval_s": 0}),
    ("/controller/scan", {"interval_s": -1}),
    ("/controller/scan", {"interval_s": 1, "output_delay_s": -1}),
    ("/controller/scan", {"interval_s": 1, "method": "forward_difference"}),
    ("/controller/proportional", {"value": 0, "unit": "percent_band"}),
]

REFUSED_PLANTS: list[tuple[dict[str, Any], str]] = [
    ({"kind": "transfer_function", "numerator": [], "denominator": [1.0]}, "numerator"),
    ({"kind": "transfer_function", "numerator": [1.0], "denominator": []}, "denominator"),
    ({"kind": "transfer_function", "numerator": [0.0], "denominator": [1.0, 1.0]}, "numerator"),
    ({"kind": "transfer_function", "numerator": [1.0], "denominator": [0.0, 0.0]}, "denominator"),
    ({"kind": "transfer_function", "numerator": [1.0, 0.0], "denominator": [1.0]}, "numerator"),
    ({"kind": "transfer_function", "numerator": [1.0, 0.0], "denominator": [0.0, 1.0]}, "numerator"),
    ({"kind": "transfer_function", "numerator": [1.0], "denominator": MANY}, "denominator"),
    ({"kind": "transfer_function", "numerator": [1.0, True], "denominator": [1.0, 1.0]}, "numerator/1"),
    ({"kind": "transfer_function", "numerator": [1.0], "denominator": [1.0, "2"]}, "denominator/1"),
    ({"kind": "zeros_poles_gain", "zeros_rad_s": [-1.0], "poles_rad_s": [], "gain": 1.0}, "zeros_rad_s"),
    (
        {"kind": "zeros_poles_gain", "zeros_rad_s": [], "poles_rad_s": [[-1.0, 2.0]], "gain": 1.0},
        "poles_rad_s/0",
    ),
    ({"kind": "zeros_poles_gain", "zeros_rad_s": [], "poles_rad_s": MANY, "gain": 1.0}, "poles_rad_s"),
    ({"kind": "second_order", "gain": 1.0, "time_constants_s": [1.0, 0.0]}, "time_constants_s/1"),
    ({"kind": "second_order", "gain": 1.0, "time_constants_s": [1.0]}, "time_constants_s/1"),
    (
        {"kind": "second_order", "gain": 1.0, "natural_frequency_rad_s": 0.0, "damping_ratio": 1.0},
        "natural_frequency_rad_s",
    ),
    ({"kind": "state_space", "a": [], "b": [], "c": []}, "a"),
    ({"kind": "state_space", "a": [[1.0, 2.0]], "b": [1.0], "c": [1.0]}, "a/0"),
    (
        {
            "kind": "frequency_response",
            "frequencies_rad_s": [1.0, 1.0],
            "response": [[1.0, 0.0]] * 2,
            "unstable_poles": 0,
        },
        "frequencies_rad_s/1",
    ),
    (
        {
            "kind": "frequency_response",
            "frequencies_rad_s": [1.0, 2.0],
            "response": [[1.0, 0.0]] * 2,
            "unstable_poles": -1,
        },
        "unstable_poles",
    ),
]

EXTREMES = [5e-324, 1e-300, 1e-100, 1e-12, 1e12, 1e100, 1e300, 1.7976931348623157e308]
EXTREME_PLACES = [
    "/plant_model/gain",
    "/plant_model/time_constant_s",
    "/plant_model/dead_time_s",
    "/controller/proportional/value",
    "/controller/integral/value",
    "/controller/derivative/value",
    "/controller/derivative_filter/value",
    "/controller/measurement_filter_s",
]


@pytest.mark.parametrize(("pointer", "value"), REFUSED, ids=str)
def test_a_value_that_no_loop_has_is_refused_at_its_place(pointer: str, value: object) -> None:
    places = refused_at(changed(pointer, value))
    assert len(places) == 1
    assert places[0].startswith(pointer)


@pytest.mark.parametrize(("plant", "place"), REFUSED_PLANTS, ids=lambda told: str(told)[:60])
def test_a_plant_that_cannot_be_is_refused_at_its_place(plant: dict[str, Any], place: str) -> None:
    assert refused_at(changed("/plant_model", plant)) == [f"/plant_model/{place}"]


def numbers(value: object) -> list[float]:
    if isinstance(value, dict):
        return [number for item in value.values() for number in numbers(item)]
    if isinstance(value, list):
        return [number for item in value for number in numbers(item)]
    return [value] if isinstance(value, float) else []


@pytest.mark.parametrize("value", EXTREMES)
@pytest.mark.parametrize("pointer", EXTREME_PLACES)
@pytest.mark.filterwarnings("error")
def test_an_extreme_number_is_answered_or_refused_and_nothing_else(pointer: str, value: float) -> None:
    request = accepted(changed(pointer, value))
    try:
        answered = json.loads(to_bytes(answer(request)))
    except InvalidDocument as refusal:
        answered = {"refused_at": [problem.pointer for problem in refusal.errors]}
    if answered.get("refused_at"):
        return
    assert answered["verdict"] in ("stable", "unstable", "undecided")
    assert all(math.isfinite(number) for number in numbers(answered))


@pytest.mark.parametrize("pointer", ["/plant_model/gain_basis", "/controller/gain_basis"])
def test_engineering_units_without_ranges_are_refused_where_they_are_asked_for(pointer: str) -> None:
    with pytest.raises(InvalidDocument) as caught:
        answer(accepted(changed(pointer, "engineering_units")))
    assert [problem.pointer for problem in caught.value.errors] == [pointer]


def test_a_loop_without_a_solution_is_refused() -> None:
    plant = {"kind": "transfer_function", "numerator": [-0.5], "denominator": [1.0]}
    gain = {"value": 2, "unit": "gain"}
    request = changed("/plant_model", plant)
    request["controller"] = {"form": "ideal", "action": "reverse", "proportional": gain}
    with pytest.raises(InvalidDocument, match="ill-posed"):
        answer(accepted(request))


def test_the_same_request_gives_the_same_answer() -> None:
    assert to_bytes(answer(accepted(REQUEST))) == to_bytes(answer(accepted(REQUEST)))
