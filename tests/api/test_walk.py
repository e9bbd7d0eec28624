"""The main job end to end: a tool submits, a second person signs, gains are typed in, the sheet is read."""

from __future__ import annotations

import hashlib
import io
import json
import math
from itertools import pairwise

import pytest
import rfc8785
from pypdf import PdfReader

from tests.api import plant
from tests.api.conftest import Decide, Service
from tests.api.plant import Body, changed


def test_a_recomputation_needs_no_record(service: Service) -> None:
    before = service.rows()
    answer = service.post("/v1/recomputations", plant.RECOMPUTATION)
    assert answer.status_code == 200
    assert answer.json["verdict"] == "stable"
    assert service.rows() == before


def test_a_recomputation_says_what_its_textbook_says(service: Service) -> None:
    # 2·Kc·e^(−s)/(5s+1) reaches its limit at Kc = 4.2512: ω = 1.68868 solves atan(5ω) + ω = π, and
    # Kc = sqrt(1 + 25·ω²)/2 (closed form; the value is printed in textbooks of process control, from memory)
    body = {
        "plant_model": {"kind": "first_order", "gain": 2.0, "time_constant_s": 5.0, "dead_time_s": 1.0},
        "controller": {
            "form": "ideal",
            "action": "reverse",
            "proportional": {"value": 1.0, "unit": "gain"},
        },
    }
    margins = service.post("/v1/recomputations", body).json["continuous"]["margins"]
    assert margins["gain_margin"] == pytest.approx(4.2512, abs=5e-5)


def test_registered_gains_go_from_the_tool_to_the_panel(
    service: Service, loop_id: str, submission: Body, decide: Decide
) -> None:
    assert submission["state"] == "awaiting_review"
    assert [entry["model"]["operating_point"] for entry in submission["recomputations"]] == ["normal load"]
    assert submission["recomputations"][0]["result"]["verdict"] == "stable"

    signed = decide()
    assert signed.status_code == 201, signed.text
    assert signed.json["signed_by"] == {"name": "reviewer", "full_name": "Reviewer"}
    path = f"/v1/submissions/{submission['id']}"
    assert service.get(path).json["state"] == "approved"

    installed = service.post(f"{path}/installations", plant.installed_now())
    assert installed.status_code == 201, installed.text
    whole = service.get(path).json
    assert whole["state"] == "in_force"
    assert [decision["decision"] for decision in whole["decisions"]] == ["approve"]
    assert whole["installations"][0]["installation"]["typed_by"] == "N. Abara"
    running = service.get(f"/v1/loops/{loop_id}/gains-in-force").json["gains_in_force"]
    assert running["submission_id"] == submission["id"]


def test_what_was_typed_in_last_is_told_beside_what_is_in_force(
    service: Service, loop_id: str, submission: Body, decide: Decide
) -> None:
    decide()
    path, running = f"/v1/submissions/{submission['id']}", f"/v1/loops/{loop_id}/gains-in-force"
    mistyped = changed(plant.installed_now(), "/as_left/proportional/value", 20.0)
    made = service.post(f"{path}/installations", mistyped).json
    told = service.get(running).json
    assert told == {"gains_in_force": None, "left_otherwise": made}
    listed = service.get("/v1/submissions?left_otherwise=true").json["items"]
    assert [line["id"] for line in listed] == [submission["id"]]
    service.post(f"{path}/installations", plant.installed_now())
    assert service.get(running).json["left_otherwise"] is None
    assert service.get("/v1/submissions?left_otherwise=true").json["items"] == []
    assert service.get("/v1/submissions?left_otherwise=perhaps").status_code == 400


def test_gains_left_otherwise_are_recomputed_and_told_wherever_the_installation_is(
    service: Service, submission: Body, decide: Decide
) -> None:
    decide()
    path = f"/v1/submissions/{submission['id']}"
    mistyped = changed(plant.installed_now(), "/as_left/proportional/value", 20.0)
    key = {"Idempotency-Key": "typed-once"}
    answer = service.post(f"{path}/installations", mistyped, headers=key)
    told = answer.json["as_left_recomputed"]
    assert told["verdict"] == "unstable"
    (recomputed,) = told["recomputations"]
    assert recomputed["model"] == submission["recomputations"][0]["model"]
    request = {"plant_model": plant.MODEL["plant_model"], "controller": mistyped["as_left"]}
    alone = service.post("/v1/recomputations", request | {"include": ["second_opinion"]}).json
    own = [each for each in recomputed["result"]["findings"] if "finding" in each]
    assert recomputed["result"] | {"findings": own} == alone
    # the same request again is the same record, and nothing is computed or written
    rows = service.rows()
    assert service.post(f"{path}/installations", mistyped, headers=key).json == answer.json
    assert service.rows() == rows
    assert service.get(path).json["installations"] == [answer.json]
    (event,) = service.get("/v1/history?kind=gains_installed_otherwise", person="auditor").json["items"]
    in_history = event["content"]["installation"]["as_left_recomputed"]
    assert in_history["verdict"] == "unstable"
    assert in_history["recomputations"][0]["model"] == recomputed["model"]
    mended = service.post(f"{path}/installations", plant.installed_now()).json
    assert mended["as_left_recomputed"] is None


def test_the_sheet_comes_out_as_a_pdf_with_the_gains_as_they_were_typed(
    service: Service, submission: Body, decide: Decide
) -> None:
    decide()
    sheet = service.get(f"/v1/submissions/{submission['id']}/sheet.pdf")
    assert (sheet.status_code, sheet.mimetype) == (200, "application/pdf")
    assert sheet.headers["Content-Disposition"].startswith("inline")
    text = "".join(page.extract_text() for page in PdfReader(io.BytesIO(sheet.data)).pages)
    assert "TIC-204" in text
    assert "2.00" in text


def test_the_bytes_made_at_a_decision_stay_whatever_comes_after(
    service: Service, submission: Body, decide: Decide
) -> None:
    path = f"/v1/submissions/{submission['id']}"
    assert service.get(f"{path}/sheet.pdf?as_signed=true").status_code == 404
    decide()
    signed = service.get(f"{path}/sheet.pdf?as_signed=true").data
    assert signed == service.get(f"{path}/sheet.pdf").data
    service.post(f"{path}/installations", plant.installed_now())
    assert service.get(f"{path}/sheet.pdf?as_signed=true").data == signed
    assert service.get(f"{path}/sheet.pdf").data != signed
    assert service.get(f"{path}/sheet.pdf?as_signed=perhaps").status_code == 400


def test_each_step_stands_in_the_history_and_the_entries_are_chained(
    service: Service, submission: Body, decide: Decide
) -> None:
    decide()
    service.post(f"/v1/submissions/{submission['id']}/installations", plant.installed_now())
    events = service.get("/v1/history?tag=tic-204&limit=200", person="auditor").json["items"]
    by = [event["actor"] for event in events]
    assert by == ["submitter", "submitter", "submitter", "reviewer", "reviewer", "submitter"]
    assert len({event["kind"] for event in events}) == len(events)
    everything = service.get("/v1/history?limit=200", person="auditor").json["items"]
    for before, after in pairwise(everything):
        assert after["previous"] == before["digest"]


def test_an_entrys_digest_is_the_leaf_hash_of_its_canonical_text(service: Service, loop_id: str) -> None:
    # RFC 9162, section 2.1.1: the hash of a leaf is SHA-256 of 0x00 and the leaf
    whole = service.get("/v1/history/1", person="auditor").json
    leaf = hashlib.sha256(b"\x00" + whole["canonical"].encode()).hexdigest()
    assert whole["event"]["digest"] == leaf


def test_the_content_digest_is_the_sha256_of_the_content_that_is_served(
    service: Service, submission: Body
) -> None:
    content = service.get(f"/v1/submissions/{submission['id']}/content")
    assert hashlib.sha256(content.data).hexdigest() == submission["content_digest"]
    assert content.json["reason"] == plant.SUBMISSION["reason"]


AWKWARD = (
    0.1 + 0.2,
    1 / 3,
    math.pi,
    5e-324,
    2.2250738585072014e-308,
    1.7976931348623157e308,
    1e16,
    1e21,
    1e-7,
    123456789012345680.0,
    4.35,
    -1.0000000000000002,
    *(math.ldexp(0.7, power) for power in range(-1000, 1001, 250)),
)
"""Where shortest digits, exponents and subnormal numbers go wrong; RFC 8785, appendix B, has such a list."""


def test_what_is_read_back_is_what_was_sent_to_the_last_bit(service: Service, loop_id: str) -> None:
    settings = [{"name": f"setting {n}", "value": value, "unit": ""} for n, value in enumerate(AWKWARD)]
    controller = plant.CONTROLLER | {"recorded_settings": settings}
    controller |= {"proportional": {"value": AWKWARD[0], "unit": "gain"}}
    made = service.post("/v1/submissions", plant.SUBMISSION | {"controller": controller}).json
    path = f"/v1/submissions/{made['id']}"
    content = service.get(f"{path}/content")
    for kept in (service.get(path).json["controller"], content.json["gain_sets"][0]["controller"]):
        assert kept["proportional"]["value"].hex() == AWKWARD[0].hex()
        values = [setting["value"] for setting in kept["recorded_settings"]]
        assert [float(value).hex() for value in values] == [value.hex() for value in AWKWARD]
    # the digest is that of exactly these bits, in the canonical form of a reference of RFC 8785
    whole = json.loads(content.data, parse_int=float)
    assert hashlib.sha256(rfc8785.dumps(whole)).hexdigest() == made["content_digest"]


def test_a_negative_zero_is_read_as_zero(service: Service, loop_id: str) -> None:
    controller = plant.CONTROLLER | {"measurement_filter_s": -0.0}
    made = service.post("/v1/submissions", plant.SUBMISSION | {"controller": controller}).json
    assert math.copysign(1.0, made["controller"]["measurement_filter_s"]) == 1.0


def test_the_answer_to_a_submission_is_what_reading_it_gives(service: Service, submission: Body) -> None:
    assert service.get(f"/v1/submissions/{submission['id']}").json == submission


def test_places_of_what_was_made_lead_to_it(service: Service) -> None:
    loop = service.post("/v1/loops", plant.LOOP)
    assert service.get(loop.headers["Location"]).json == loop.json
    model = service.post(f"{loop.headers['Location']}/models", plant.MODEL)
    assert service.get(model.headers["Location"]).json == model.json


def test_lists_are_paged_and_their_links_lead_to_the_end(service: Service) -> None:
    for number in range(5):
        assert service.post("/v1/loops", plant.LOOP | {"tag": f"TIC-30{number}"}).status_code == 201
    seen: list[str] = []
    path: str | None = "/v1/loops?limit=2&site=vanholm"
    while path:
        page = service.get(path)
        assert page.status_code == 200
        seen += [loop["tag"] for loop in page.json["items"]]
        links = {
            relation.split('"')[1]: target.strip(" <>")
            for target, relation in (link.split(";") for link in page.headers["Link"].split(","))
        }
        path = links.get("next")
    assert seen == [f"TIC-30{number}" for number in range(5)]


def test_a_cursor_holds_for_the_list_it_was_made_for_and_no_other(service: Service) -> None:
    for number in range(3):
        service.post("/v1/loops", plant.LOOP | {"tag": f"TIC-30{number}"})
    link = service.get("/v1/loops?limit=1&site=Vanholm").headers["Link"]
    cursor = link.split("cursor=")[1].split(">")[0]
    assert service.get(f"/v1/loops?limit=2&site=Vanholm&cursor={cursor}").status_code == 200
    assert service.get(f"/v1/loops?limit=1&site=Elsewhere&cursor={cursor}").status_code == 400
    assert service.get(f"/v1/submissions?limit=1&cursor={cursor}").status_code == 400
    tampered = cursor[:-1] + ("A" if cursor[-1] != "A" else "B")
    assert service.get(f"/v1/loops?limit=1&site=Vanholm&cursor={tampered}").status_code == 400


def test_the_history_as_csv_holds_no_formula(service: Service) -> None:
    service.post("/v1/loops", plant.LOOP | {"tag": "=HYPERLINK(1)", "site": "@SUM(A1)"})
    answer = service.get("/v1/history?limit=200", person="auditor", headers={"Accept": "text/csv"})
    assert answer.mimetype == "text/csv"
    assert "'=HYPERLINK(1)" in answer.text
    assert ",=HYPERLINK" not in answer.text
    assert ",@SUM" not in answer.text


def test_a_representation_that_is_not_offered_is_406(service: Service) -> None:
    answer = service.get("/v1/history", person="auditor", headers={"Accept": "image/png"})
    assert (answer.status_code, answer.json["type"]) == (406, "/problems/not-acceptable")


def test_records_are_never_kept_by_a_cache(service: Service, submission: Body) -> None:
    for path in ("/v1/loops", f"/v1/submissions/{submission['id']}", "/v1/history"):
        assert service.get(path, person="auditor").headers["Cache-Control"] == "no-store"


def test_answers_carry_the_headers_that_browsers_obey(service: Service) -> None:
    headers = service.get("/v1/loops").headers
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert "default-src 'none'" in headers["Content-Security-Policy"]
    assert json.dumps(dict(headers)).find("Werkzeug") == -1
