"""The invented year, lived through the real interface on a real store."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from io import BytesIO
from pathlib import Path
from typing import Any

import pytest
from flask import Flask
from pypdf import PdfReader
from werkzeug.test import TestResponse

from service.app import create_app
from service.context import services
from service.demonstration.store import Demonstration, fill
from service.records.errors import StoreNotUsable
from service.settings import Settings

NOW = datetime(2026, 12, 1, 9, tzinfo=UTC)
pytestmark = pytest.mark.xdist_group("demonstration")


@dataclass(frozen=True)
class Shown:
    """The filled store behind the application, read by the auditor."""

    settings: Settings
    app: Flask
    demonstration: Demonstration

    def read(self, path: str) -> TestResponse:
        bearer = {"Authorization": f"Bearer {self.demonstration.tokens['odette.fairweather']}"}
        answer = self.app.test_client().get(path, headers=bearer)
        assert answer.status_code == 200, answer.get_data(as_text=True)
        return answer

    def get(self, path: str) -> Any:
        return self.read(path).get_json()

    def submissions(self, query: str = "") -> list[dict[str, Any]]:
        items: list[dict[str, Any]] = self.get(f"/v1/submissions?limit=100{query}")["items"]
        return [self.get(f"/v1/submissions/{item['id']}") for item in items]


@pytest.fixture(scope="module")
def shown(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Shown]:
    store = tmp_path_factory.mktemp("demonstration") / "gain-signoff.db"
    settings = Settings(database_url=f"sqlite:///{store}", secret_key="k" * 32)
    demonstration = fill(settings, NOW, on_change=lambda _change: None)
    app = create_app(settings)
    yield Shown(settings, app, demonstration)
    with app.app_context():
        services().database.close()


def verdicts(submission: dict[str, Any]) -> set[str]:
    return {recomputation["result"]["verdict"] for recomputation in submission["recomputations"]}


def test_every_loop_is_registered(shown: Shown) -> None:
    tags = {loop["tag"] for loop in shown.get("/v1/loops?limit=100")["items"]}
    assert tags == set(shown.demonstration.plant.loops)


def test_the_year_leaves_submissions_in_every_state_that_a_year_knows(shown: Shown) -> None:
    states = {submission["state"] for submission in shown.submissions()}
    decided = {"approved", "in_force", "superseded", "rejected", "withdrawn", "revoked"}
    assert states >= {"awaiting_review", *decided, "expired", "lapsed"}


def test_what_awaits_review_is_worth_a_review(shown: Shown) -> None:
    awaiting = shown.submissions("&state=awaiting_review")
    assert {"stable", "unstable", "undecided"} == set().union(*map(verdicts, awaiting))


def test_a_claim_that_differs_is_waiting(shown: Shown) -> None:
    (density,) = shown.submissions("&state=awaiting_review&tag=DIC-1130")
    outcomes = {claim["name"]: claim["outcome"] for claim in density["recomputations"][0]["result"]["claims"]}
    assert outcomes["gain_margin"] == "differs"
    assert outcomes["phase_margin_deg"] == "agrees"


def test_a_proposal_in_good_order_is_waiting(shown: Shown) -> None:
    (dosing,) = shown.submissions("&state=awaiting_review&tag=FIC-2250")
    assert {claim["outcome"] for claim in dosing["recomputations"][0]["result"]["claims"]} == {"agrees"}
    assert (dosing["deviations_needed"], dosing["hindrances"]) == ([], [])


def test_the_rejected_gains_of_the_vacuum_had_the_wrong_action(shown: Shown) -> None:
    (vacuum,) = shown.submissions("&state=rejected&tag=PIC-3302")
    findings = {finding.get("finding") for finding in vacuum["recomputations"][0]["result"]["findings"]}
    assert "wrong_action" in findings


def test_the_rejected_gains_of_the_ph_would_have_cycled_on_the_steep_part_of_its_curve(shown: Shown) -> None:
    (acid,) = shown.submissions("&state=rejected&tag=AIC-2231")
    worst = acid["recomputations"][0]["result"]["worst_case"]
    assert worst["stable_for_all"] is False
    (acid,) = shown.submissions("&state=in_force&tag=AIC-2231")
    assert acid["recomputations"][0]["result"]["worst_case"]["stable_for_all"] is True


def test_the_cascade_is_judged_as_its_controllers_scan_it(shown: Shown) -> None:
    for tag in ("TIC-2240", "TIC-2241"):
        (loop,) = shown.submissions(f"&state=in_force&tag={tag}")
        assert loop["recomputations"][0]["result"]["judged_on"] == "sampled"


def test_nothing_that_was_approved_is_below_the_service_s_floors(shown: Shown) -> None:
    for submission in shown.submissions():
        if any(decision["decision"] == "approve" for decision in submission["decisions"]):
            assert verdicts(submission) == {"stable"}


def test_the_safety_related_loop_was_approved_by_two(shown: Shown) -> None:
    (reactor,) = shown.submissions("&state=in_force&tag=TIC-6120")
    signers = {decision["signed_by"]["name"] for decision in reactor["decisions"]}
    assert len(signers) == 2
    authors = [reactor["submitted_by"], *reactor["prepared_by"]]
    assert signers.isdisjoint(author["name"] for author in authors)


def test_the_longest_ordinary_sheet_has_two_pages(shown: Shown) -> None:
    """A loop that needs two approvals, with claims, a read-back and gains before."""
    (reactor,) = shown.submissions("&state=in_force&tag=TIC-6120")
    pdf = shown.read(f"/v1/submissions/{reactor['id']}/sheet.pdf").get_data()
    assert len(PdfReader(BytesIO(pdf)).pages) == 2


def test_the_first_event_says_that_it_is_a_demonstration(shown: Shown) -> None:
    first = shown.get("/v1/history?limit=1")["items"][0]
    assert first["number"] == 1
    assert first["content"]["demonstration"] is True


def test_a_store_that_holds_anything_is_not_touched(shown: Shown) -> None:
    store = Path(shown.settings.database_url.removeprefix("sqlite:///"))
    before = store.read_bytes()
    with pytest.raises(StoreNotUsable):
        fill(shown.settings, NOW, on_change=lambda _change: None)
    assert store.read_bytes() == before


def test_a_transmitter_was_ranged_anew_by_two_people_and_the_gains_followed(shown: Shown) -> None:
    (change,) = shown.get("/v1/changes?tag=TIC-2205")["items"]
    assert change["state"] == "confirmed"
    assert change["proposed_by"]["name"] != change["decision"]["signed_by"]["name"]
    assert (change["before"]["pv"]["low"], change["after"]["pv"]["low"]) == (20.0, 60.0)
    (confirmed,) = shown.get("/v1/history?kind=loop_change_confirmed")["items"]
    (due,) = confirmed["content"]["recheck_due"]
    before, after = (
        shown.get(f"/v1/submissions/{due}"),
        shown.submissions("&state=in_force&tag=TIC-2205")[0],
    )
    assert before["state"] == "superseded"
    assert not before["recheck_due"]
    # the gain in per cent of the range follows the span, so that the loop is the loop that it was
    margins = [
        each["recomputations"][0]["result"]["continuous"]["margins"]["gain_margin"]
        for each in (before, after)
    ]
    assert margins[1] == pytest.approx(margins[0], rel=0.01)


def test_a_change_of_a_loop_awaits_a_second_person(shown: Shown) -> None:
    (change,) = shown.get("/v1/changes?state=awaiting_confirmation")["items"]
    assert change["before"]["tag"] == "PIC-4107"
