"""The documents of the records ask for all of a controller and refuse what people could not read."""

from __future__ import annotations

import copy
from typing import Any

import pytest

from service.documents.decisions import DecisionRequest
from service.documents.errors import InvalidDocument
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.reading import read
from service.documents.submissions import SubmissionRequest
from tests.documents.requests import ABSENT, REQUEST, as_bytes, changed

CONTROLLER: dict[str, Any] = REQUEST["controller"]
TWO_ZEROS: dict[str, Any] = {
    "form": "two_zeros",
    "action": "reverse",
    "gain": 2.0,
    "zeros_rad_s": [-0.1],
    "derivative_filter": None,
    "measurement_filter_s": 0.0,
    "setpoint_weight": "unknown",
    "scan": None,
}
SUBMISSION: dict[str, Any] = {
    "loop": {"site": "North works", "tag": "TIC-101"},
    "controller": CONTROLLER,
    "kind": "planned",
    "reason": "Slow after the exchanger was cleaned.",
    "safety_effect": "None: no trip or relief valve depends on this loop.",
}
DECISION: dict[str, Any] = {
    "decision": "approve",
    "reason": "Margins are wide.",
    "content_digest": "0123456789abcdef" * 4,
    "password": "a long enough password",
}
INSTALLATION: dict[str, Any] = {
    "as_found": CONTROLLER,
    "as_left": CONTROLLER,
    "installed_at": "2026-11-02T14:05:00+01:00",
}
LOOP: dict[str, Any] = {
    "site": "North works",
    "tag": "TIC-101",
    "description": "Feed temperature",
    "area": "Distillation",
    "pv": {"low": 0, "high": 200, "unit": "°C"},
    "output": {"low": 0, "high": 100, "unit": "%"},
}
MODEL: dict[str, Any] = {
    "plant_model": REQUEST["plant_model"],
    "operating_point": "normal feed",
    "evidence": "Step of 5 % on 2 October, twice.",
}


def refused_at(document_type: type, document: dict[str, Any]) -> list[str]:
    with pytest.raises(InvalidDocument) as caught:
        read(document_type, as_bytes(document))
    return [problem.pointer for problem in caught.value.errors]


@pytest.mark.parametrize(
    ("document_type", "document"),
    [
        (SubmissionRequest, SUBMISSION),
        (DecisionRequest, DECISION),
        (InstallationRequest, INSTALLATION),
        (LoopRegistration, LOOP),
        (ModelVersion, MODEL),
    ],
    ids=lambda told: getattr(told, "__name__", ""),
)
def test_a_complete_document_is_read(document_type: type, document: dict[str, Any]) -> None:
    assert isinstance(read(document_type, as_bytes(document)), document_type)


@pytest.mark.parametrize("name", list(CONTROLLER))
def test_a_submission_names_everything_of_its_controller(name: str) -> None:
    document = changed(f"/controller/{name}", ABSENT, SUBMISSION)
    assert f"/controller/{name}" in refused_at(SubmissionRequest, document)


@pytest.mark.parametrize("name", list(TWO_ZEROS))
def test_a_controller_with_two_zeros_names_gain_and_zeros_in_place_of_terms(name: str) -> None:
    document = changed("/controller", {key: TWO_ZEROS[key] for key in TWO_ZEROS if key != name}, SUBMISSION)
    assert f"/controller/{name}" in refused_at(SubmissionRequest, document)


def test_a_complete_controller_with_two_zeros_is_read() -> None:
    assert read(SubmissionRequest, as_bytes(changed("/controller", TWO_ZEROS, SUBMISSION)))


@pytest.mark.parametrize("name", ["as_found", "as_left"])
def test_an_installation_names_everything_of_both_controllers(name: str) -> None:
    document = changed(f"/{name}/scan", ABSENT, INSTALLATION)
    assert refused_at(InstallationRequest, document) == [f"/{name}/scan"]


def test_a_set_of_gains_names_everything_of_its_controller() -> None:
    gain_set = {"condition": "low feed", "operating_points": ["low"], "controller": copy.deepcopy(CONTROLLER)}
    del gain_set["controller"]["setpoint_weight"]
    document = changed("/gain_sets", [gain_set], SUBMISSION)
    del document["controller"]
    assert refused_at(SubmissionRequest, document) == ["/gain_sets/0/controller/setpoint_weight"]


def test_a_default_is_not_asked_for_where_nothing_is_recorded() -> None:
    assert read(ModelVersion, as_bytes(MODEL)).plant_model.gain_basis == "percent_of_range"


def test_a_controller_and_gain_sets_do_not_stand_together() -> None:
    sets = [{"condition": "low", "operating_points": ["low"], "controller": CONTROLLER}]
    assert refused_at(SubmissionRequest, changed("/gain_sets", sets, SUBMISSION)) == ["/controller"]


@pytest.mark.parametrize("name", ["state", "id", "approved_by", "submitted_at"])
def test_what_the_service_decides_is_not_taken_from_a_submission(name: str) -> None:
    assert refused_at(SubmissionRequest, changed(f"/{name}", "approved", SUBMISSION)) == [f"/{name}"]


@pytest.mark.parametrize(
    "tag",
    [
        "",
        " ",
        "TIC 101 ",
        "TIC\u202e101",
        "TIC\u200b101",
        "TIC\n101",
        "TIC\ufeff101",
        "TI\u0043\u0327",
        "T" * 61,
    ],
)
def test_a_tag_that_people_cannot_read_as_it_is_stored_is_refused(tag: str) -> None:
    assert refused_at(LoopRegistration, changed("/tag", tag, LOOP)) == ["/tag"]


@pytest.mark.parametrize("tag", ["TIC-101", "10 FIC 0042.A", "Ofen-Ø7", "流量-1"])
def test_a_tag_is_the_sites_own_text(tag: str) -> None:
    assert read(LoopRegistration, as_bytes(changed("/tag", tag, LOOP))).tag == tag


@pytest.mark.parametrize("reason", ["", " \n ", "fine\u202egnihton", "x" * 4001, "bell\u0007"])
def test_a_reason_that_says_nothing_or_hides_something_is_refused(reason: str) -> None:
    assert refused_at(DecisionRequest, changed("/reason", reason, DECISION)) == ["/reason"]


def test_a_reason_may_take_several_lines() -> None:
    told = "First.\n\tSecond."
    assert read(DecisionRequest, as_bytes(changed("/reason", told, DECISION))).reason == told


@pytest.mark.parametrize("digest", ["", "0" * 63, "0" * 65, "G" * 64, "A" * 64, "0" * 64 + "\n"])
def test_a_digest_is_64_lower_case_hex_digits(digest: str) -> None:
    assert refused_at(DecisionRequest, changed("/content_digest", digest, DECISION)) == ["/content_digest"]


def test_a_password_does_not_show_where_a_decision_is_printed() -> None:
    assert DECISION["password"] not in repr(read(DecisionRequest, as_bytes(DECISION)))


def test_one_criterion_has_one_deviation() -> None:
    twice = [{"criterion": "gain_margin_min", "reason": "known"}] * 2
    assert refused_at(DecisionRequest, changed("/deviation", twice, DECISION)) == ["/deviation/1/criterion"]


@pytest.mark.parametrize(
    "moment", ["2026-11-02T14:05:00", "2026-11-02", "yesterday", 1793628300, "2026-13-01T00:00:00Z"]
)
def test_a_time_is_rfc_3339_with_its_offset(moment: object) -> None:
    document = changed("/installed_at", moment, INSTALLATION)
    assert refused_at(InstallationRequest, document) == ["/installed_at"]


def test_a_time_is_kept_in_utc() -> None:
    installed_at = read(InstallationRequest, as_bytes(INSTALLATION)).installed_at
    assert installed_at.isoformat() == "2026-11-02T13:05:00+00:00"


def test_a_loop_is_not_its_own_inner_loop() -> None:
    itself = {"site": "NORTH works", "tag": "tic-101"}
    assert refused_at(LoopRegistration, changed("/inner_loop", itself, LOOP)) == ["/inner_loop"]


def test_a_range_that_is_empty_is_refused() -> None:
    assert refused_at(LoopRegistration, changed("/pv/high", 0, LOOP)) == ["/pv/high"]


def test_a_limit_that_does_not_exist_is_refused() -> None:
    assert refused_at(LoopRegistration, changed("/criteria", {"elegance_min": 3}, LOOP)) == [
        "/criteria/elegance_min"
    ]
