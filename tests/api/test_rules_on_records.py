"""What rules on records ask to be refused, clause by clause, over HTTP.

The clauses are those of the trust specification, sections 1 and 3. A refusal that has its test elsewhere is
not tried again here: signatures moved and bytes changed in tests/verification, credentials in
test_credentials, roles in test_role_matrix, areas, hostile bodies and the order of refusals in test_refusals,
preconditions in test_preconditions, resets and names in test_people, a second person in test_changes.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from typing import Any

import pytest

from service.api.problems import CATALOGUE
from tests.api import plant
from tests.api.conftest import Decide, Service, password_of
from tests.api.plant import Body, changed, without
from tests.api.test_role_matrix import MATRIX, World, path_of
from tests.api.test_role_matrix import world as world  # a fixture

SERVERS_OWN = (
    "id",
    "state",
    "verdict",
    "number",
    "time",
    "actor",
    "digest",
    "event_number",
    "submitted_by",
    "submitted_at",
    "approved_by",
    "signed_by",
    "signed_at",
    "decided_by",
    "recorded_by",
    "recorded_at",
    "proposed_by",
)
"""What the service alone says of a record."""

CALLS = [call for call, cell in MATRIX.items() if cell.body]
WITH_REASON = {
    ("post", "/v1/submissions"),
    ("post", "/v1/submissions/{submission_id}/decisions"),
    ("put", "/v1/loops/{loop_id}"),
    ("post", "/v1/loops/{loop_id}/changes"),
    ("post", "/v1/changes/{change_id}/decisions"),
    ("put", "/v1/accounts/{name}/access"),
    ("put", "/v1/accounts/{name}/full-name"),
    ("post", "/v1/accounts/{name}/closures"),
    ("post", "/v1/accounts/{name}/password-resets"),
    ("post", "/v1/accounts/{name}/password-reset-confirmations"),
    ("post", "/v1/tokens/{token_id}/revocations"),
}


def call(world: World, which: tuple[str, str], change: Body, *left_out: str) -> Any:
    """Make one call of the matrix as somebody who may, with another body."""
    method, template = which
    cell = MATRIX[which]
    turn = replace(world, who=sorted(cell.allowed)[0])
    body = {key: value for key, value in cell.body(turn).items() if key not in left_out}  # type: ignore[misc]
    headers = turn.etag(path_of(turn, cell.seen)) if cell.seen else {}
    return turn.service.call(
        method.upper(), path_of(turn, template), turn.who, body | change, headers=headers
    )


def places(answer: Any) -> set[str]:
    assert answer.status_code == 422, answer.text
    return {error["pointer"] for error in answer.json["errors"]}


# 21 CFR 11.10(e), Annex 11 §9: time and actor come from the server, a reason is required


def test_nobody_states_what_the_server_says_of_a_record(world: World) -> None:
    before = world.service.rows()
    for which in CALLS:
        answer = call(world, which, dict.fromkeys(SERVERS_OWN, "made up"))
        assert places(answer) >= {f"/{name}" for name in SERVERS_OWN}, which
    assert world.service.rows() == before


@pytest.mark.parametrize("reason", [None, "", " \n", "\u200b"], ids=["none", "empty", "blank", "invisible"])
def test_no_change_goes_without_its_reason(world: World, reason: str | None) -> None:
    before = world.service.rows()
    for which in WITH_REASON:
        answer = call(world, which, {} if reason is None else {"reason": reason}, "reason")
        assert places(answer) == {"/reason"}, which
    assert world.service.rows() == before


def test_every_change_that_takes_a_reason_is_tried_without(world: World) -> None:
    bodies = {which: MATRIX[which].body(replace(world, who="both")) for which in CALLS}  # type: ignore[misc]
    assert {which for which, body in bodies.items() if "reason" in body} == WITH_REASON


# 21 CFR 11.10(f): no approval without submission and recomputation; a wrong step is 409

STEPS: dict[str, tuple[str, ...]] = {
    "awaiting_review": (),
    "approved": ("approve",),
    "in_force": ("approve", "install"),
    "rejected": ("reject",),
    "withdrawn": ("withdraw",),
    "revoked": ("approve", "revoke"),
    "revoked after it was installed": ("approve", "install", "revoke"),
}
OPEN: dict[str, set[str]] = {
    "awaiting_review": {"approve", "reject", "withdraw"},
    "approved": {"install", "revoke"},
    "in_force": {"install", "revoke"},
}


def take(service: Service, submission: Body, decide: Decide, step: str) -> int:
    if step == "install":
        path = f"/v1/submissions/{submission['id']}/installations"
        return service.post(path, plant.installed_now()).status_code
    return decide(step, "submitter" if step == "withdraw" else "reviewer").status_code


@pytest.mark.parametrize("state", STEPS)
def test_a_step_that_the_state_does_not_allow_is_409_and_changes_nothing(
    service: Service, submission: Body, decide: Decide, state: str
) -> None:
    for step in STEPS[state]:
        assert take(service, submission, decide, step) == 201
    before = service.rows()
    wrong = {"approve", "reject", "withdraw", "revoke", "install"} - OPEN.get(state, set())
    assert {step: take(service, submission, decide, step) for step in wrong} == dict.fromkeys(wrong, 409)
    assert service.rows() == before


def test_gains_that_were_only_found_are_never_decided(service: Service, loop_id: str) -> None:
    made = service.post("/v1/submissions", plant.SUBMISSION | {"kind": "baseline"}).json
    assert made["state"] == "recorded"
    for wrong in ("approve", "reject", "withdraw", "revoke"):
        person = "submitter" if wrong == "withdraw" else "reviewer"
        body = {"decision": wrong, "reason": "tried", "content_digest": made["content_digest"]}
        signed = body | {"password": password_of(person)}
        assert service.post(f"/v1/submissions/{made['id']}/decisions", signed, person).status_code == 409


# 21 CFR 11.200, 11.300: a token alone never signs, nobody signs as another


def test_a_password_that_is_none_or_another_persons_signs_nothing(
    service: Service, submission: Body, decide: Decide
) -> None:
    for password in (None, "", "x" * 129):
        assert places(decide(password=password)) == {"/password"}
    for person in ("submitter", "second_reviewer", "administrator"):
        answer = decide(password=password_of(person))
        assert (answer.status_code, answer.json["type"]) == (403, "/problems/signing-refused")
    assert service.get(f"/v1/submissions/{submission['id']}").json["state"] == "awaiting_review"


def test_a_token_alone_signs_nothing(service: Service, submission: Body, world: World) -> None:
    for which in (
        ("post", "/v1/submissions/{submission_id}/decisions"),
        ("post", "/v1/changes/{change_id}/decisions"),
    ):
        assert places(call(world, which, {}, "password")) == {"/password"}
    assert service.get(f"/v1/submissions/{submission['id']}").json["state"] == "awaiting_review"


def test_no_other_role_than_the_reviewers_signs(service: Service, submission: Body, decide: Decide) -> None:
    for person in ("administrator", "auditor", "submitter"):
        for decision in ("approve", "reject", "revoke"):
            assert decide(decision, person).status_code == 403
    assert service.get(f"/v1/submissions/{submission['id']}").json["state"] == "awaiting_review"


# 29 CFR 1910.119(l): the basis, the effect on safety, whether it is temporary and until when


def test_a_change_of_gains_states_its_basis_and_its_effect(service: Service, loop_id: str) -> None:
    for name in ("reason", "safety_effect", "kind"):
        assert places(service.post("/v1/submissions", without(plant.SUBMISSION, name))) == {f"/{name}"}


def test_a_time_that_is_past_when_it_is_stated_is_refused(service: Service, loop_id: str) -> None:
    past = (datetime.now(UTC) - timedelta(seconds=1)).isoformat()
    for name in ("temporary_until", "install_by"):
        assert places(service.post("/v1/submissions", plant.SUBMISSION | {name: past})) == {f"/{name}"}


def test_gains_that_were_found_are_not_temporary_and_not_to_be_installed(
    service: Service, loop_id: str
) -> None:
    later = (datetime.now(UTC) + timedelta(days=1)).isoformat()
    times = {"temporary_until": later, "install_by": later}
    answer = service.post("/v1/submissions", plant.SUBMISSION | {"kind": "baseline"} | times)
    assert places(answer) == {"/temporary_until", "/install_by"}


# IEC 61511-1 §17 and OWASP ASVS 2.3.5: two people, neither of whom submitted or prepared


def test_whoever_prepared_gains_does_not_decide_on_them(service: Service, loop_id: str) -> None:
    made = service.post("/v1/submissions", plant.SUBMISSION | {"prepared_by": ["both"]}).json
    for decision in ("approve", "reject"):
        body = {"decision": decision, "reason": "tried", "content_digest": made["content_digest"]}
        signed = body | {"password": password_of("both")}
        assert service.post(f"/v1/submissions/{made['id']}/decisions", signed, "both").status_code == 403
    told = service.get("/v1/history?kind=signing_refused", "auditor").json["items"]
    assert [(each["actor"], each["content"]["submission_id"]) for each in told] == [("both", made["id"])] * 2


def test_one_person_does_not_approve_twice_where_two_are_needed(service: Service) -> None:
    loop = service.post("/v1/loops", plant.LOOP | {"safety_related": True}).json
    service.post(f"/v1/loops/{loop['id']}/models", plant.MODEL)
    made = service.post("/v1/submissions", plant.SUBMISSION).json
    path = f"/v1/submissions/{made['id']}"
    body = {"decision": "approve", "reason": "read", "content_digest": made["content_digest"]}

    def approve(person: str) -> int:
        signed = body | {"password": password_of(person)}
        return service.post(f"{path}/decisions", signed, person).status_code

    assert approve("reviewer") == 201
    assert approve("reviewer") == 403
    assert service.get(path).json["state"] == "awaiting_review"
    assert approve("second_reviewer") == 201
    assert service.get(path).json["state"] == "approved"


# ISA-5.1: a tag is the site's exact string, and one loop's


def test_a_tag_that_reads_like_another_is_refused(service: Service) -> None:
    composed_late = "A\u030a-1"
    for tag in ("", " TIC-204", "TIC-204 ", "TIC  204", "TIC\t204", composed_late, "TIC\u00ad204"):
        assert places(service.post("/v1/loops", plant.LOOP | {"tag": tag})) == {"/tag"}


def test_a_tag_in_other_letters_is_the_same_loop(service: Service, loop_id: str) -> None:
    for other in ({"tag": "tic-204"}, {"site": "VANHOLM"}):
        assert service.post("/v1/loops", plant.LOOP | other).status_code == 409


# ISA-TR5.9: gains mean nothing without form, units, action, filter and scan


def test_gains_without_what_gives_them_meaning_are_refused(service: Service, loop_id: str) -> None:
    for name in ("form", "action", "measurement_filter_s", "setpoint_weight", "scan"):
        body = plant.SUBMISSION | {"controller": without(plant.CONTROLLER, name)}
        assert places(service.post("/v1/submissions", body)) == {f"/controller/{name}"}
    for term in ("proportional", "integral"):
        bare = changed(plant.SUBMISSION, f"/controller/{term}", without(plant.CONTROLLER[term], "unit"))
        assert places(service.post("/v1/submissions", bare)) == {f"/controller/{term}/unit"}


# section 3: one catalogue with a page for each type; pages take a cookie alone


def test_each_type_of_problem_has_its_page_and_no_other(service: Service) -> None:
    for problem in CATALOGUE:
        page = service.get(f"/problems/{problem.name}", person=None)
        assert page.status_code == 200
        assert problem.title in page.text
    assert service.get("/problems/made-up", person=None).status_code == 404


def test_a_token_opens_no_page(service: Service) -> None:
    for path in ("/", "/loops", "/history", "/resets", "/password"):
        assert service.get(path, "administrator").status_code == 401
