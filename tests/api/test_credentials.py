"""Who gets in: every route of the application, taken from its own table of routes."""

from __future__ import annotations

import pytest
from werkzeug.routing import Rule

from service.app import create_app
from service.settings import Settings
from tests.api.conftest import SECRET_KEY, Kept, Service

OPEN = {"/v1/openapi.json", "/reference", "/livez", "/readyz", "/problems", "/problems/<name>"}
"""What interface.md names as open to all: API description, liveness, problem pages."""


def api_rules(service: Service) -> list[Rule]:
    rules = service.app.url_map.iter_rules()
    return [rule for rule in rules if not rule.endpoint.startswith("pages.") and rule.rule not in OPEN]


def path_of(rule: Rule) -> str:
    values = {name: 7 if name == "number" else "unknown" for name in rule.arguments}
    return str(rule.build(values, append_unknown=False)[1])


def test_every_route_of_the_api_but_the_open_ones_asks_for_a_credential(service: Service) -> None:
    tried = [
        (method, path_of(rule))
        for rule in api_rules(service)
        for method in (rule.methods or set()) - {"HEAD", "OPTIONS"}
    ]
    answers = {(method, path): service.call(method, path, person=None) for method, path in tried}
    assert len(tried) > 15
    assert {call: answer.status_code for call, answer in answers.items() if answer.status_code != 401} == {}
    assert {answer.headers["WWW-Authenticate"] for answer in answers.values()} == {
        'Bearer realm="gain sign-off"'
    }
    assert {answer.json["type"] for answer in answers.values()} == {"/problems/unauthenticated"}


@pytest.mark.parametrize(
    "path", ["/v1/openapi.json", "/reference", "/livez", "/readyz", "/problems", "/problems/conflict"]
)
def test_the_open_routes_ask_for_none(service: Service, path: str) -> None:
    assert service.get(path.replace("<name>", "conflict"), person=None).status_code == 200


@pytest.mark.parametrize(
    "header",
    [
        "Bearer",
        "Bearer ",
        "Bearer unknown",
        "Bearer {token}x",
        "Basic {token}",
        "{token}",
        "Bearer {half}.{half}",
        "Bearer ünknown",
    ],
)
def test_what_is_no_valid_token_is_refused(service: Service, header: str) -> None:
    token = service.tokens["submitter"]
    sent = header.format(token=token, half=token.split(".")[0])
    assert service.get("/v1/loops", person=None, headers={"Authorization": sent}).status_code == 401


def test_a_token_in_the_address_or_a_cookie_is_no_credential(service: Service) -> None:
    token = service.tokens["submitter"]
    client = service.app.test_client()
    client.set_cookie("token", token)
    assert client.get(f"/v1/loops?access_token={token}").status_code == 401


def test_the_credential_is_asked_for_before_the_body_is_read(service: Service) -> None:
    for body in (b"{", b"x" * 2_000_000):
        assert service.call("POST", "/v1/loops", person=None, data=body).status_code == 401


def test_no_application_is_made_without_a_secret_key_of_32_bytes(kept: Kept) -> None:
    with pytest.raises(ValueError, match="GAIN_SIGNOFF_SECRET_KEY"):
        create_app(Settings(database_url=kept.url))
    with pytest.raises(ValueError, match="32 bytes"):
        create_app(Settings(database_url=kept.url, secret_key=SECRET_KEY[:31]))
