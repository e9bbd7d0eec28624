from __future__ import annotations

from typing import Any

import pytest
from flask import Flask

from service.monitoring.metrics import REGISTRY
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import password_of


def cookie_of(person: Person) -> Any:
    found = person.client.get_cookie("gain_signoff_session")
    assert found is not None
    return found


def test_signing_in_leads_to_what_awaits_review(visitor: Person) -> None:
    page = visitor.sign_in("reviewer")
    assert page.one("h1").text == "What awaits review"
    assert "Bo Lindgren, reviewer" in page.one("header").text


@pytest.mark.parametrize(
    ("name", "password"), [("reviewer", "wrong " * 4), ("nobody", "wrong " * 4), ("", "")]
)
def test_a_failed_sign_in_says_the_same_whatever_was_wrong(visitor: Person, name: str, password: str) -> None:
    visitor.open("/sign-in")
    page = visitor.send("/sign-in", name=name, password=password)
    assert visitor.status == 401
    expected = "The name and the password do not belong together, or the account is closed."
    assert expected in page.one(id="problems").text
    assert page.one("input", id="name").get("value") == name
    assert not page.one("input", id="password").get("value")


def test_a_script_cannot_read_the_cookie_and_no_other_site_can_send_it(visitor: Person) -> None:
    visitor.sign_in("reviewer")
    cookie = cookie_of(visitor)
    assert cookie.http_only
    assert cookie.same_site == "Lax"


def test_on_the_machine_itself_the_cookie_travels_without_encryption(visitor: Person) -> None:
    visitor.sign_in("reviewer")
    assert not cookie_of(visitor).secure


def test_anywhere_else_the_cookie_travels_encrypted_only(app: Flask) -> None:
    client = app.test_client()
    page = client.get("/sign-in", base_url="https://signing.example")
    token = page.text.split('name="token" value="')[1][:64]
    typed = {"name": "reviewer", "password": password_of("reviewer"), "token": token}
    answer = client.post("/sign-in", data=typed, base_url="https://signing.example")
    set_cookies = [value for value in answer.headers.getlist("Set-Cookie") if "_session=" in value]
    assert len(set_cookies) == 1
    assert "Secure" in set_cookies[0]


def test_signing_in_takes_no_identifier_that_was_there_before(visitor: Person) -> None:
    visitor.client.set_cookie("gain_signoff_session", "chosen-by-somebody-else")
    visitor.sign_in("reviewer")
    first = cookie_of(visitor).value
    assert first != "chosen-by-somebody-else"
    visitor.sign_in("reviewer")
    assert cookie_of(visitor).value != first


def test_after_signing_out_the_old_cookie_opens_nothing(reviewer: Person) -> None:
    secret = cookie_of(reviewer).value
    page = reviewer.send("/sign-out")
    assert "You are signed out." in page.text
    reviewer.client.set_cookie("gain_signoff_session", secret)
    reviewer.open("/")
    assert reviewer.status == 401


def test_the_page_that_was_asked_for_follows_the_sign_in(visitor: Person) -> None:
    visitor.open("/loops?tag=TIC-204")
    assert visitor.status == 401
    page = visitor.send("/sign-in", name="reviewer", password=password_of("reviewer"))
    assert page.one("h1").text == "Loops"
    assert page.one("input", id="tag").get("value") == "TIC-204"


@pytest.mark.parametrize(
    "path",
    [
        "//elsewhere.example",
        "https://elsewhere.example/",
        "/\\elsewhere.example",
        "javascript:alert(1)",
        "/\n/x",
        "",
    ],
)
def test_no_address_outside_follows_the_sign_in(visitor: Person, path: str) -> None:
    visitor.client.get("/sign-in")
    visitor.open("/sign-in?next=x")
    visitor.send("/sign-in", follow=False, next=path, name="reviewer", password=password_of("reviewer"))
    assert visitor.answer is not None
    assert visitor.answer.headers["Location"] == "/"


def test_every_failure_is_counted_for_whoever_watches_the_service(visitor: Person) -> None:
    def counted() -> tuple[float, float]:
        name = "gain_signoff_sign_in_failures_total"
        wrong, too_soon = (
            REGISTRY.get_sample_value(name, {"reason": reason}) for reason in ("wrong", "too_soon")
        )
        return wrong or 0, too_soon or 0

    before = counted()
    visitor.open("/sign-in")
    for _ in range(6):
        visitor.send("/sign-in", name="nobody", password="wrong " * 4)
    visitor.sign_in("reviewer")
    assert (counted()[0] - before[0], counted()[1] - before[1]) == (5, 1)


def test_too_many_failures_are_told_to_wait(visitor: Person) -> None:
    visitor.open("/sign-in")
    for _ in range(30):
        visitor.send("/sign-in", name="reviewer", password="not the password at all")
        if visitor.status == 429:
            break
    assert visitor.status == 429
    assert visitor.answer is not None
    assert int(visitor.answer.headers["Retry-After"]) > 0
    assert "Wait" in visitor.page.one(id="problems").text


def test_a_form_sent_after_the_session_ended_shows_what_was_typed(signed_in: SignedIn) -> None:
    person = signed_in("reviewer")
    answer = person.client.post("/sign-out", data={"token": "x"})
    assert answer.status_code == 403
    person.client.delete_cookie("gain_signoff_session")
    person.answer = person.client.post(
        "/submissions/anything/confirm", data={"reason": "An hour's thought.", "password": "not to be shown"}
    )
    assert person.status == 401
    assert "An hour's thought." in person.page.text
    assert "not to be shown" not in person.answer.text
