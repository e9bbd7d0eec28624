from __future__ import annotations

import pytest
from flask import Flask

from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept, password_of

FORMS = [
    "sign_out",
    "confirm",
    "sign",
    "installation",
    "sign_change",
    "propose_change",
    "propose_retirement",
    "password",
    "reset",
]


def routes(app: Flask) -> dict[str, tuple[str, set[str]]]:
    """Every page by name: an address with its places filled in, and its methods."""
    filled = {}
    for rule in app.url_map.iter_rules():
        if rule.endpoint.startswith("pages."):
            address = rule.rule
            for argument in rule.arguments:
                value = {"step": "withdraw", "number": "1", "filename": "paper.css", "name": "DejaVuSans.ttf"}
                for converter in ("", "path:", "int:", "any(withdraw, revoke):"):
                    address = address.replace(f"<{converter}{argument}>", value.get(argument, "0" * 32))
            filled[rule.endpoint.removeprefix("pages.")] = (address, set(rule.methods or ()))
    return filled


def address_of(app: Flask, kept: Kept, name: str) -> str:
    return routes(app)[name][0].replace("0" * 32, kept.submissions["stable"])


def test_every_page_but_sign_in_and_its_looks_is_closed_to_a_stranger(app: Flask) -> None:
    open_to_all = set()
    for name, (address, methods) in routes(app).items():
        assert "<" not in address
        for method in methods & {"GET", "POST"}:
            with app.test_client().open(address, method=method) as answer:
                if answer.status_code not in (401, 403):
                    open_to_all.add(name)
    assert open_to_all == {"sign_in", "static", "typeface"}


def test_every_form_is_tried_here(app: Flask) -> None:
    assert {name for name, (_, methods) in routes(app).items() if "POST" in methods} == {"sign_in", *FORMS}


@pytest.mark.parametrize("name", FORMS)
def test_a_form_without_its_token_is_refused(app: Flask, kept: Kept, reviewer: Person, name: str) -> None:
    answer = reviewer.client.post(address_of(app, kept, name), data={"decision": "approve"})
    assert answer.status_code == 403
    assert "This form was not accepted" in answer.text


@pytest.mark.parametrize("name", FORMS)
def test_the_token_of_somebody_else_is_refused(
    app: Flask, kept: Kept, signed_in: SignedIn, reviewer: Person, name: str
) -> None:
    other = signed_in("second").page.one("input", name="token").get("value")
    assert reviewer.client.post(address_of(app, kept, name), data={"token": other}).status_code == 403


@pytest.mark.parametrize(
    "headers",
    [
        {"Origin": "https://elsewhere.example"},
        {"Origin": "null"},
        {"Sec-Fetch-Site": "cross-site"},
        {"Sec-Fetch-Site": "same-site"},
    ],
    ids=["another origin", "an opaque origin", "another site", "a neighbour"],
)
@pytest.mark.parametrize("name", FORMS)
def test_a_form_from_elsewhere_is_refused_even_with_the_right_token(
    app: Flask, kept: Kept, reviewer: Person, name: str, headers: dict[str, str]
) -> None:
    token = reviewer.page.one("input", name="token").get("value")
    answer = reviewer.client.post(address_of(app, kept, name), data={"token": token}, headers=headers)
    assert answer.status_code == 403


def test_a_form_from_this_very_site_is_taken(reviewer: Person) -> None:
    token = reviewer.page.one("input", name="token").get("value")
    headers = {"Origin": "http://localhost", "Sec-Fetch-Site": "same-origin"}
    assert reviewer.client.post("/sign-out", data={"token": token}, headers=headers).status_code == 303


def test_nobody_can_be_signed_in_by_a_form_from_elsewhere(app: Flask) -> None:
    typed = {"name": "reviewer", "password": password_of("reviewer"), "token": "0" * 64}
    assert app.test_client().post("/sign-in", data=typed).status_code == 403


def test_a_token_of_one_visit_does_not_sign_in_another(app: Flask, visitor: Person) -> None:
    token = visitor.open("/sign-in").one("input", name="token").get("value")
    typed = {"name": "reviewer", "password": password_of("reviewer"), "token": token}
    assert app.test_client().post("/sign-in", data=typed).status_code == 403
