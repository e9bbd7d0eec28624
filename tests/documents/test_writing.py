"""Dataclasses become JSON that says the same, to the last bit."""

from __future__ import annotations

import json
import math
import struct
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.analysis.plant import TransferFunction
from service.documents.reading import read
from service.documents.recomputations import RecomputationAnswer, RecomputationRequest, answer
from service.documents.strict_json import parse
from service.documents.writing import plain, to_bytes
from tests.documents.requests import REQUEST, accepted, changed

FLOATS = st.floats(allow_nan=False, allow_infinity=False).map(lambda number: number + 0.0)


def bits(numbers: tuple[float, ...]) -> list[bytes]:
    return [struct.pack(">d", number) for number in numbers]


def answered(document: dict[str, Any] = REQUEST) -> dict[str, Any]:
    told = json.loads(to_bytes(answer(accepted(document))))
    assert isinstance(told, dict)
    return told


@given(st.lists(FLOATS, min_size=1, max_size=21))
def test_the_bits_of_a_plant_come_back_from_json(numbers: list[float]) -> None:
    sent = TransferFunction(
        kind="transfer_function",
        numerator=(1.0,),
        denominator=(*numbers[:20], 1.0),
        gain_basis="percent_of_range",
    )
    request = replace(accepted(REQUEST), plant_model=sent)
    received = read(RecomputationRequest, to_bytes(request)).plant_model
    assert isinstance(received, TransferFunction)
    assert bits(received.denominator) == bits(sent.denominator)


def test_a_request_comes_back_from_json_as_it_was() -> None:
    request = accepted(REQUEST)
    assert read(RecomputationRequest, to_bytes(request)) == request


def test_minus_zero_is_written_as_zero() -> None:
    assert to_bytes([-0.0]) == b"[0.0]"


@pytest.mark.parametrize("number", [math.nan, math.inf, -math.inf])
def test_what_is_no_finite_number_is_never_written(number: float) -> None:
    with pytest.raises(ValueError):
        to_bytes([number])


def test_what_has_no_place_in_a_document_is_never_written() -> None:
    with pytest.raises(TypeError, match="set"):
        plain({"a": {1}})


def test_a_time_is_written_in_utc() -> None:
    moment = datetime(2026, 3, 1, 1, 30, tzinfo=timezone(timedelta(hours=2)))
    assert plain(moment) == "2026-02-28T23:30:00Z"


def test_a_time_in_utc_is_read_back() -> None:
    moment = datetime(2026, 3, 1, 1, 30, 0, 250000, tzinfo=UTC)
    assert datetime.fromisoformat(str(plain(moment))) == moment


def test_an_answer_has_the_parts_of_the_interface() -> None:
    # interface, section 4, with the further fields facts and not_computed
    assert list(answered()) == [
        "verdict",
        "judged_on",
        "continuous",
        "sampled",
        "worst_case",
        "loop_type",
        "equivalent_gains",
        "findings",
        "claims",
        "engine",
        "facts",
        "not_computed",
    ]


def test_an_analysis_has_the_parts_of_the_interface() -> None:
    parts = {"stability", "margins", "setpoint_step", "load_step", "noise", "crossovers", "notes"}
    assert set(answered()["continuous"]) == parts


def test_curves_are_sent_where_they_are_asked_for() -> None:
    assert set(answered(changed("/include", ["curves"]))["curves"]) == {
        "setpoint",
        "load",
        "frequency",
        "root_loci",
    }


def test_a_term_that_a_controller_does_not_have_is_left_out_of_its_equivalents() -> None:
    controller = {"form": "ideal", "action": "reverse", "proportional": {"value": 2, "unit": "gain"}}
    ideal = answered(changed("/controller", controller))["equivalent_gains"][0]
    assert list(ideal["controller"]) == ["proportional"]


def test_an_answer_comes_back_from_json_as_it_was() -> None:
    request = changed("/criteria", {"gain_margin_min": 2})
    request["claims"] = {"gain_margin": 3.0, "gain_reduction_margin": "unbounded"}
    request["include"] = ["curves"]
    found = answer(accepted(request))
    assert read(RecomputationAnswer, to_bytes(found)) == found


def test_the_answer_on_an_unstable_loop_comes_back_from_json_as_it_was() -> None:
    found = answer(accepted(changed("/controller/action", "direct")))
    assert read(RecomputationAnswer, to_bytes(found)) == found


def test_an_indented_answer_says_the_same() -> None:
    found = answer(accepted(REQUEST))
    assert parse(to_bytes(found, indent=2)) == parse(to_bytes(found))
