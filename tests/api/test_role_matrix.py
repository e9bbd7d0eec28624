"""Role × route: every operation of the route table, tried by an account of each role alone."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import pytest

from service.api.openapi import routes_of
from service.context import services
from service.records import accounts
from service.records.roles import CONSOLE
from tests.api import plant
from tests.api.conftest import Service, password_of
from tests.api.plant import Body

ROLES = ("submitter", "reviewer", "auditor", "administrator")
EVERYBODY = frozenset(ROLES)
CHANGE_LOOPS = frozenset({"submitter", "administrator"})
SUBMIT = frozenset({"submitter"})
DECIDE = frozenset({"reviewer"})
LOOK_AFTER = frozenset({"administrator"})
SEE_PEOPLE = frozenset({"administrator", "auditor"})


@dataclass(frozen=True)
class World:
    """A store with one of everything, made by an account of two roles, and whose turn it is."""

    service: Service
    who: str
    loop: str
    model: str
    submission: Body
    change: Body
    token: str

    def signature(self, decision: str, digest: str) -> Body:
        signed = {"decision": decision, "reason": "Tried by each role.", "content_digest": digest}
        return signed | {"password": password_of(self.who)}

    def etag(self, path: str) -> dict[str, str]:
        return {"If-Match": self.service.get(path, "administrator").headers["ETag"]}


@dataclass(frozen=True)
class Cell:
    """One row of the matrix: who may, what they get, and what the others get."""

    allowed: frozenset[str]
    status: int = 200
    refused: int = 403
    body: Callable[[World], Body] | None = None
    query: str = ""
    seen: str = ""
    """The resource whose ETag the change names."""


REASON: Body = {"reason": "Tried by each role."}
PASSWORD = "a battery out of a drawer"
WIDER = plant.LOOP | {"pv": {"low": 0.0, "high": 200.0, "unit": "°C"}}
LOOP, MODEL, SUBMISSION = (
    "/v1/loops/{loop_id}",
    "/v1/loops/{loop_id}/models",
    "/v1/submissions/{submission_id}",
)
ACCOUNT, CHANGE = "/v1/accounts/{name}", "/v1/changes/{change_id}"


def _access(_world: World) -> Body:
    return {"roles": ["auditor"], "areas": ["Tank farm"]} | REASON


MATRIX: dict[tuple[str, str], Cell] = {
    ("post", "/v1/recomputations"): Cell(EVERYBODY, body=lambda _: plant.RECOMPUTATION),
    ("get", "/v1/limits"): Cell(EVERYBODY),
    # loops and their models
    ("post", "/v1/loops"): Cell(CHANGE_LOOPS, 201, body=lambda _: plant.LOOP | {"tag": "TIC-999"}),
    ("get", "/v1/loops"): Cell(EVERYBODY),
    ("get", LOOP): Cell(EVERYBODY),
    ("put", LOOP): Cell(
        CHANGE_LOOPS, body=lambda _: plant.LOOP | {"service_class": "heat"} | REASON, seen=LOOP
    ),
    ("get", f"{LOOP}/revisions"): Cell(EVERYBODY),
    ("get", f"{LOOP}/gains-in-force"): Cell(EVERYBODY),
    ("get", MODEL): Cell(EVERYBODY),
    ("post", MODEL): Cell(CHANGE_LOOPS, 201, body=lambda _: plant.MODEL),
    ("get", f"{MODEL}/{{model_id}}"): Cell(EVERYBODY),
    # changes that need a second person
    ("post", f"{LOOP}/changes"): Cell(
        # the loop is at its second revision where the change above was allowed
        CHANGE_LOOPS,
        201,
        body=lambda _: {"revision": 2, "loop": WIDER} | REASON,
    ),
    ("get", f"{LOOP}/changes"): Cell(EVERYBODY),
    ("get", "/v1/changes"): Cell(EVERYBODY),
    ("get", CHANGE): Cell(EVERYBODY),
    ("get", f"{CHANGE}/content"): Cell(EVERYBODY),
    ("post", f"{CHANGE}/decisions"): Cell(
        DECIDE, 201, body=lambda world: world.signature("reject", world.change["content_digest"])
    ),
    # submissions
    ("post", "/v1/submissions"): Cell(SUBMIT, 201, body=lambda _: plant.SUBMISSION),
    ("get", "/v1/submissions"): Cell(EVERYBODY),
    ("get", SUBMISSION): Cell(EVERYBODY),
    ("get", f"{SUBMISSION}/content"): Cell(EVERYBODY),
    ("get", f"{SUBMISSION}/curves"): Cell(EVERYBODY),
    ("get", f"{SUBMISSION}/comparison"): Cell(EVERYBODY),
    ("get", f"{SUBMISSION}/sheet.pdf"): Cell(EVERYBODY),
    # nothing is approved yet: allowed by role, refused by state
    ("post", f"{SUBMISSION}/installations"): Cell(SUBMIT, 409, body=lambda _: plant.installed_now()),
    ("post", f"{SUBMISSION}/decisions"): Cell(
        DECIDE, 201, body=lambda world: world.signature("reject", world.submission["content_digest"])
    ),
    # the history
    ("get", "/v1/history"): Cell(EVERYBODY),
    ("get", "/v1/history/{number}"): Cell(EVERYBODY),
    ("get", "/v1/history/checkpoint"): Cell(EVERYBODY),
    ("get", "/v1/history/{number}/inclusion"): Cell(EVERYBODY),
    ("get", "/v1/history/consistency"): Cell(EVERYBODY, query="?first=1"),
    # people
    ("get", "/v1/accounts"): Cell(SEE_PEOPLE),
    ("post", "/v1/accounts"): Cell(
        LOOK_AFTER,
        201,
        body=lambda _: {
            "name": "new.comer",
            "full_name": "New Comer",
            "roles": ["auditor"],
            "new_password": PASSWORD,
        },
    ),
    ("get", ACCOUNT): Cell(SEE_PEOPLE, refused=404),
    ("put", f"{ACCOUNT}/access"): Cell(LOOK_AFTER, refused=404, body=_access, seen=ACCOUNT),
    ("put", f"{ACCOUNT}/full-name"): Cell(
        LOOK_AFTER, refused=404, body=lambda _: {"full_name": "Another Name"} | REASON, seen=ACCOUNT
    ),
    ("post", f"{ACCOUNT}/password-reset-confirmations"): Cell(
        LOOK_AFTER, 201, refused=404, body=lambda _: REASON
    ),
    ("post", f"{ACCOUNT}/password-resets"): Cell(
        LOOK_AFTER, 201, refused=404, body=lambda _: {"new_password": PASSWORD} | REASON
    ),
    ("get", "/v1/tokens"): Cell(SEE_PEOPLE),
    ("post", "/v1/tokens"): Cell(LOOK_AFTER, 201, body=lambda _: {"account": "elsewhere", "note": "tried"}),
    ("post", "/v1/tokens/{token_id}/revocations"): Cell(LOOK_AFTER, 201, refused=404, body=lambda _: REASON),
    ("post", f"{ACCOUNT}/closures"): Cell(LOOK_AFTER, 201, refused=404, body=lambda _: REASON),
    # last, since it changes the password that signs
    ("post", "/v1/password-changes"): Cell(
        EVERYBODY,
        201,
        body=lambda world: {"present_password": password_of(world.who), "new_password": PASSWORD},
    ),
}
"""interface.md section 5, the table of roles, in the order in which the operations are tried."""


def test_the_matrix_has_every_operation_of_the_route_table(service: Service) -> None:
    routes = {(route.method, route.path) for route in routes_of(service.app)}
    assert set(MATRIX) == routes
    assert len(routes) > 40


@pytest.fixture
def world(service: Service, loop_id: str) -> World:
    submission = service.post("/v1/submissions", plant.SUBMISSION, "both").json
    change = service.post(f"/v1/loops/{loop_id}/changes", {"revision": 1, "loop": WIDER} | REASON, "both")
    (model,) = service.get(f"/v1/loops/{loop_id}/models").json["items"]
    with service.app.app_context(), services().database.writing() as session:
        now = services().database.now()
        # from the console, so that any administrator may confirm it
        accounts.reset_password(session, CONSOLE, "elsewhere", PASSWORD, "forgotten", now)
    return World(
        service=service,
        who="",
        loop=loop_id,
        model=model["id"],
        submission=submission,
        change=change.json,
        token=service.tokens["elsewhere"].partition(".")[0],
    )


def path_of(world: World, template: str) -> str:
    return template.format(
        loop_id=world.loop,
        model_id=world.model,
        submission_id=world.submission["id"],
        change_id=world.change["id"],
        name="elsewhere",
        token_id=world.token,
        # the entry of the loop's registration; the first ones are about people
        number=world.service.get("/v1/history?kind=loop_registered", "auditor").json["items"][0]["number"],
    )


@pytest.mark.parametrize("role", ROLES)
def test_every_cell_of_the_matrix(world: World, role: str) -> None:
    turn = replace(world, who=role)
    found = {call: _try(turn, role, *call, cell) for call, cell in MATRIX.items()}
    expected = {call: _expected(role, call, cell) for call, cell in MATRIX.items()}
    assert found == expected


def _expected(role: str, call: tuple[str, str], cell: Cell) -> int:
    if role in cell.allowed:
        return cell.status
    # who sees an account is told that they may not change it; for the others there is none
    return 403 if cell.refused == 404 and role == "auditor" and ACCOUNT in call[1] else cell.refused


def _try(world: World, role: str, method: str, template: str, cell: Cell) -> int:
    service, path = world.service, path_of(world, template)
    headers = world.etag(path_of(world, cell.seen)) if cell.seen else {}
    body = cell.body(world) if cell.body else None
    before = service.rows()
    answer = service.call(method.upper(), path + cell.query, role, body, headers=headers)
    if role not in cell.allowed:
        assert service.rows() == before, (method, template)
    return answer.status_code
