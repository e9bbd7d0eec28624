"""What one route alone says is stable is undecided at every door, and nobody can approve it."""

from __future__ import annotations

import io
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest
from pypdf import PdfReader

from service.analysis import stability
from service.analysis.nyquist import Count
from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body

Fault = Callable[[Count], Count]


def one_too_many(count: Count) -> Count:
    return replace(count, roots=(count.roots or 0) + 1)


def no_answer(_count: Count) -> Count:
    return Count(None, reason="broken on purpose")


@pytest.fixture(params=["encirclements", "roots"])
def break_one_route(
    request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch
) -> Callable[[Fault], None]:
    """Return what breaks one of the two routes from now on."""
    encirclements, roots = stability.count_right_of_axis, stability.characteristic_roots

    def break_encirclements(fault: Fault) -> None:
        monkeypatch.setattr(stability, "count_right_of_axis", lambda axis: fault(encirclements(axis)))

    def break_roots(fault: Fault) -> None:
        def broken(*given: Any) -> Any:
            found = roots(*given)
            return replace(found, count=fault(found.count))

        monkeypatch.setattr(stability, "characteristic_roots", broken)

    return break_encirclements if request.param == "encirclements" else break_roots


both_faults = pytest.mark.parametrize("fault", [one_too_many, no_answer])


@both_faults
def test_the_answer_to_a_recomputation_is_undecided_with_its_reason(
    service: Service, break_one_route: Callable[[Fault], None], fault: Fault
) -> None:
    assert service.post("/v1/recomputations", plant.RECOMPUTATION).json["verdict"] == "stable"
    break_one_route(fault)
    told = service.post("/v1/recomputations", plant.RECOMPUTATION | {"criteria": {"gain_margin_min": 1.1}})
    assert told.status_code == 200
    assert told.json["verdict"] == told.json["continuous"]["stability"]["verdict"] == "undecided"
    assert told.json["continuous"]["stability"]["reason"]
    assert {told.json["continuous"][part] for part in ("margins", "setpoint_step", "load_step")} == {None}
    found = {entry.get("finding") or entry["criterion"]: entry for entry in told.json["findings"]}
    assert found["undecided"]["weight"] == "stop"
    assert found["gain_margin_min"]["outcome"] == "not_assessed"


@both_faults
def test_what_one_route_alone_says_is_stable_is_recorded_and_never_approved(
    service: Service, loop_id: str, break_one_route: Callable[[Fault], None], fault: Fault
) -> None:
    break_one_route(fault)
    submission: Body = service.post("/v1/submissions", plant.SUBMISSION).json
    result = submission["recomputations"][0]["result"]
    assert result["verdict"] == "undecided"
    path = f"/v1/submissions/{submission['id']}"
    # a deviation for every limit, so that nothing but the verdict is in the way
    asked = [entry["criterion"] for entry in result["findings"] if "criterion" in entry]
    refused = service.post(
        f"{path}/decisions",
        {
            "decision": "approve",
            "reason": "All is answered for.",
            "content_digest": submission["content_digest"],
            "password": password_of("reviewer"),
            "deviation": [{"criterion": name, "reason": "It will do."} for name in asked],
        },
        "reviewer",
    )
    assert refused.status_code == 409
    assert "at operating point normal load the loop is undecided" in refused.json["detail"]
    assert service.get(path).json["state"] == "awaiting_review"
    sheet = service.get(f"{path}/sheet.pdf")
    text = "".join(page.extract_text() for page in PdfReader(io.BytesIO(sheet.data)).pages)
    assert "COULD NOT BE SHOWN" in text.upper()
