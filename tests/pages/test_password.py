"""Changing one's own password: with the present one, typed twice, and never shown again."""

from __future__ import annotations

import pytest
from flask import Flask

from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import password_of
from tests.pages.test_decisions import kinds

NEW = "seven wet bicycles"


def change(person: Person, present: str, new: str = NEW, again: str | None = None) -> None:
    person.open("/password")
    person.send(
        "/password", present_password=present, new_password=new, again=new if again is None else again
    )


def test_after_a_change_one_signs_in_with_the_new_password(
    app: Flask, reviewer: Person, signed_in: SignedIn
) -> None:
    elsewhere = signed_in("reviewer")
    change(reviewer, password_of("reviewer"))
    assert reviewer.page.one("p", role="status").text == "Your password is changed. Sign in with the new one."
    assert kinds(app)[-1] == "password_changed"
    elsewhere.open("/")
    assert elsewhere.page.one("h1").text == "Sign in"
    reviewer.sign_in("reviewer")
    assert reviewer.status == 401
    reviewer.sign_in("reviewer", NEW)
    assert reviewer.page.one("h1").text == "What awaits review"


def test_every_page_leads_to_it(reviewer: Person) -> None:
    assert reviewer.open("/loops").one("a", href="/password").text == "Change password"


@pytest.mark.parametrize(
    ("present", "new", "again", "status", "field"),
    [
        ("wrong battery of somebody", NEW, NEW, 403, "present_password"),
        (password_of("reviewer"), NEW, NEW + "s", 422, "again"),
        (password_of("reviewer"), "too short", "too short", 422, "new_password"),
        (password_of("reviewer"), "x" * 129, "x" * 129, 422, "new_password"),
    ],
)
def test_what_is_wrong_is_named_at_its_field_and_nothing_comes_back(
    reviewer: Person, present: str, new: str, again: str, status: int, field: str
) -> None:
    change(reviewer, present, new, again)
    assert reviewer.status == status
    assert reviewer.page.one("a", href=f"#{field}")
    assert reviewer.answer is not None
    for secret in {present, new, again}:
        assert secret not in reviewer.answer.text
    reviewer.sign_in("reviewer")
    assert reviewer.status == 200


def test_a_wrong_password_leaves_its_trace(app: Flask, reviewer: Person) -> None:
    change(reviewer, "wrong battery of somebody")
    assert kinds(app)[-1] == "password_change_refused"


def test_it_is_for_people_who_are_signed_in(visitor: Person) -> None:
    visitor.open("/password")
    assert visitor.page.one("h1").text == "Sign in"
