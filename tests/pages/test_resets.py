"""A second administrator confirms a password that the first one reset."""

from __future__ import annotations

import pytest
from flask import Flask

from service.context import services
from service.records import accounts
from service.records.accounts import NewAccount
from service.records.roles import CONSOLE
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import LOUD, password_of


@pytest.fixture
def second_administrator(app: Flask, signed_in: SignedIn) -> Person:
    new = NewAccount(
        name="keeper", full_name="Hana Sato", roles=("administrator",), password=password_of("keeper")
    )
    with app.app_context(), services().database.writing() as session:
        accounts.add(session, CONSOLE, new, services().database.now())
    return signed_in("keeper")


@pytest.fixture
def reset(app: Flask, second_administrator: Person) -> None:
    with app.app_context(), services().database.writing() as session:
        actor = accounts.actor_of(session, accounts.find(session, CONSOLE, "administrator").id)
        now = services().database.now()
        accounts.reset_password(session, actor, "reviewer", "seven wet bicycles", LOUD, now)


def suspended(app: Flask) -> bool:
    with app.app_context(), services().database.reading() as session:
        return accounts.find(session, CONSOLE, "reviewer").signing_suspended


@pytest.mark.usefixtures("reset")
def test_the_second_administrator_finds_the_reset_and_confirms_it(
    app: Flask, second_administrator: Person
) -> None:
    home = second_administrator.open("/")
    assert home.one("a", href="/resets/reviewer").text == "Bo Lindgren (reviewer)"
    page = second_administrator.open("/resets/reviewer")
    assert "administrator, " in page.text
    assert LOUD in page.text
    assert page.all("script") == []
    second_administrator.send("/resets/reviewer", reason="Bo asked me at the gate.")
    assert second_administrator.page.one("p", role="status").text == (
        "The reset is confirmed: the account may sign again."
    )
    assert "No reset awaits a second administrator." in second_administrator.page.text
    assert not suspended(app)
    history = second_administrator.open("/history?kind=password_reset_confirmed")
    assert "keeper" in history.text


@pytest.mark.usefixtures("reset")
def test_a_reason_is_asked_for(app: Flask, second_administrator: Person) -> None:
    second_administrator.open("/resets/reviewer")
    for reason in ("", "a\u202eb"):
        second_administrator.send("/resets/reviewer", reason=reason)
        assert second_administrator.status == 422
        link = second_administrator.page.one("div", role="alert").one("a")
        assert link.get("href") == "#reason"
    assert suspended(app)


@pytest.mark.usefixtures("reset")
def test_whoever_reset_it_does_not_confirm_it(app: Flask, signed_in: SignedIn) -> None:
    first = signed_in("administrator")
    page = first.open("/resets/reviewer")
    assert page.all("form", action="/resets/reviewer") == []
    assert "An administrator other than the one who reset it" in page.text
    token = page.all("input", name="token")[0].get("value")
    answer = first.client.post("/resets/reviewer", data={"token": token, "reason": "It was me."})
    assert answer.status_code == 403
    assert "a second administrator" in answer.text
    assert suspended(app)


@pytest.mark.usefixtures("reset")
def test_others_see_nothing_of_it(app: Flask, signed_in: SignedIn, author: Person) -> None:
    for person in (author, signed_in("second"), signed_in("auditor")):
        assert "Passwords that were reset" not in person.open("/").text
        for path in ("/resets", "/resets/reviewer"):
            person.open(path)
            assert person.status == 403
    assert suspended(app)


def test_where_nothing_was_reset_there_is_nothing_to_confirm(signed_in: SignedIn) -> None:
    administrator = signed_in("administrator")
    assert "Passwords that were reset" not in administrator.page.text
    assert "No reset awaits a second administrator." in administrator.open("/resets").text
    administrator.open("/resets/reviewer")
    assert administrator.status == 404
