"""Plain objects become dataclasses, or every wrong place is named in one refusal."""

from __future__ import annotations

from dataclasses import fields, is_dataclass
from typing import Any

import pytest

from service.analysis.controller import ParallelController, SeriesController, TwoZerosController
from service.documents.errors import FieldProblem, NotJson
from tests.documents.requests import ABSENT, REQUEST, accepted, changed, refusals, refused_at

PLANTS: list[dict[str, Any]] = [
    {"kind": "first_order", "gain": -2.0, "time_constant_s": -3.0},
    {"kind": "second_order", "gain": 1.0, "time_constants_s": [3.0, 4.0], "lead_time_constant_s": -2.0},
    {"kind": "second_order", "gain": 1.0, "natural_frequency_rad_s": 2.0, "damping_ratio": 0.2},
    {"kind": "integrating", "gain_per_s": 0.1, "lag_s": 2.0},
    {"kind": "transfer_function", "numerator": [1.0], "denominator": [2.0, 3.0, 1.0]},
    {
        "kind": "zeros_poles_gain",
        "zeros_rad_s": [],
        "poles_rad_s": [-1.0, [-1.0, 2.0], [-1.0, -2.0]],
        "gain": 3.0,
    },
    {"kind": "state_space", "a": [[0.0, 1.0], [-2.0, -3.0]], "b": [0.0, 1.0], "c": [1.0, 0.0]},
    {
        "kind": "frequency_response",
        "frequencies_rad_s": [0.1, 1.0],
        "response": [[1.0, 0.0], [0.5, -0.5]],
        "unstable_poles": 0,
    },
]

NUMBERS = [
    "/plant_model/gain",
    "/plant_model/time_constant_s",
    "/plant_model/dead_time_s",
    "/controller/proportional/value",
    "/controller/integral/value",
    "/controller/derivative/value",
    "/controller/derivative_filter/value",
    "/controller/measurement_filter_s",
    "/controller/setpoint_weight/proportional",
]


def holds(document: Any, given: Any) -> bool:
    """Whether a dataclass holds every number and text of the plain object that it was read from."""
    if is_dataclass(document):
        names = {field.name for field in fields(document)}
        return all(name in names and holds(getattr(document, name), value) for name, value in given.items())
    if isinstance(document, tuple):
        return len(document) == len(given) and all(map(holds, document, given))
    return bool(document == given)


@pytest.mark.parametrize("plant", PLANTS, ids=lambda plant: plant["kind"])
def test_every_kind_of_plant_is_read_with_its_numbers(plant: dict[str, Any]) -> None:
    assert holds(accepted(changed("/plant_model", plant)).plant_model, plant)


def test_a_request_is_read_with_its_numbers() -> None:
    assert holds(accepted(REQUEST), REQUEST)


@pytest.mark.parametrize("wrong", [True, "1", None, [], {}, [1.0]])
@pytest.mark.parametrize("pointer", NUMBERS)
def test_what_stands_in_a_numbers_place_is_refused_there(pointer: str, wrong: object) -> None:
    assert refused_at(changed(pointer, wrong)) == [pointer]


@pytest.mark.parametrize("pointer", NUMBERS)
def test_a_whole_number_is_a_number(pointer: str) -> None:
    assert accepted(changed(pointer, 3))


@pytest.mark.parametrize(
    "pointer",
    ["/x", "/plant_model/x", "/controller/x", "/controller/integral/x", "/controller/setpoint_weight/x"],
)
def test_an_unknown_field_is_refused_where_it_stands(pointer: str) -> None:
    assert refusals(changed(pointer, 1)) == (FieldProblem(pointer, "there is no such field here"),)


@pytest.mark.parametrize(
    "pointer",
    ["/plant_model", "/controller", "/plant_model/gain", "/controller/action", "/controller/integral/unit"],
)
def test_a_missing_field_is_refused_where_it_should_stand(pointer: str) -> None:
    assert refusals(changed(pointer, ABSENT)) == (FieldProblem(pointer, "this field is missing"),)


@pytest.mark.parametrize("pointer", ["/plant_model/kind", "/controller/form"])
@pytest.mark.parametrize("wrong", ["other", 3, None, ["ideal"], ABSENT])
def test_a_kind_that_is_none_is_refused_at_the_field_that_says_it(pointer: str, wrong: object) -> None:
    assert refused_at(changed(pointer, wrong)) == [pointer]


@pytest.mark.parametrize("wrong", [None, [], 3, "x"])
@pytest.mark.parametrize("pointer", ["/plant_model", "/controller"])
def test_what_stands_in_an_objects_place_is_refused_there(pointer: str, wrong: object) -> None:
    assert refused_at(changed(pointer, wrong)) == [pointer]


@pytest.mark.parametrize("body", [b"3", b"[]", b"null", b'"x"'])
def test_a_body_that_is_no_object_is_refused_as_a_whole(body: bytes) -> None:
    assert refused_at(body) == [""]


def test_what_is_not_json_is_not_called_a_wrong_field() -> None:
    assert refused_at(b'{"controller": NaN}', NotJson) == ["/controller"]


def test_all_wrong_places_stand_in_one_refusal() -> None:
    document = changed("/plant_model/gain", "x")
    document["controller"]["integral"]["value"] = -1
    document["controller"]["scan"] = {"interval_s": 0}
    document["settling_band_percent"] = 99
    assert refused_at(document) == [
        "/controller/integral/value",
        "/controller/scan/interval_s",
        "/plant_model/gain",
        "/settling_band_percent",
    ]


def test_what_two_fields_say_together_is_refused_at_one_of_them() -> None:
    assert refused_at(changed("/controller/derivative", None)) == ["/controller/derivative_filter"]


def test_alternatives_are_told_in_one_sentence() -> None:
    (problem,) = refusals(changed("/controller/measurement_filter_s", "about 2"))
    assert problem.detail == "a number is wanted or one of these is wanted: 'unknown'"


def test_what_was_sent_is_not_repeated_in_the_refusal() -> None:
    (problem,) = refusals(changed("/controller/action", "<script>"))
    assert "script" not in problem.detail


@pytest.mark.parametrize(
    ("form", "terms", "kind"),
    [
        ("series", {"proportional": {"value": 1, "unit": "gain"}}, SeriesController),
        ("parallel", {"integral": {"value": 1, "unit": "seconds"}}, ParallelController),
        ("two_zeros", {"gain": 1, "zeros_rad_s": [-1]}, TwoZerosController),
    ],
)
def test_the_form_says_what_a_controller_is(form: str, terms: dict[str, Any], kind: type) -> None:
    controller = {"form": form, "action": "direct", **terms}
    assert isinstance(accepted(changed("/controller", controller)).controller, kind)


@pytest.mark.parametrize("setting", ["derivative_filter", "measurement_filter_s", "setpoint_weight", "scan"])
def test_a_setting_may_be_unknown(setting: str) -> None:
    assert getattr(accepted(changed(f"/controller/{setting}", "unknown")).controller, setting) == "unknown"


@pytest.mark.parametrize("band", [0.1, 2, 5.0, 20])
def test_a_settling_band_is_within_its_limits(band: float) -> None:
    assert accepted(changed("/settling_band_percent", band)).settling_band_percent == band


@pytest.mark.parametrize("band", [0, 0.0999, 20.1, -2, "2"])
def test_a_settling_band_past_its_limits_is_refused(band: object) -> None:
    assert refused_at(changed("/settling_band_percent", band)) == ["/settling_band_percent"]


def test_a_part_that_is_not_there_cannot_be_asked_for() -> None:
    assert refused_at(changed("/include", ["curves", "poem"])) == ["/include/1"]


def test_a_limit_may_be_nothing_and_not_less() -> None:
    for limit in (0.0, 0.5):
        assert accepted(REQUEST | {"criteria": {"overshoot_percent_max": limit}})
    refused = refused_at(REQUEST | {"criteria": {"overshoot_percent_max": -0.5}})
    assert "/criteria/overshoot_percent_max" in refused
