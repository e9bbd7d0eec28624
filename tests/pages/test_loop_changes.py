"""A reviewer reads a proposed change of a loop, and decides it with their own password."""

from __future__ import annotations

from typing import Any

import pytest
from flask import Flask

from service.context import services
from service.documents.changes import LoopChangeRequest
from service.documents.reading import read
from service.records import accounts, change_queries, changes, loops
from service.records.roles import CONSOLE
from service.records.views import ChangeView
from tests.pages import invented
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept, password_of

REASON = "Read against the <data sheet>."


def propose(app: Flask, kept: Kept, person: str = "author", **changed: Any) -> ChangeView:
    with app.app_context(), services().database.writing() as session:
        actor = accounts.actor_of(session, accounts.find(session, CONSOLE, person).id)
        loop_id = kept.loops["stable"]
        present = loops.find(session, actor, loop_id)
        document = invented._loop(invented.CASES["stable"]) | {
            "pv": {"low": 0.0, "high": 200.0, "unit": "°C"}
        }
        body: dict[str, Any] = {"revision": present.revision, "reason": invented.LOUD, "loop": document}
        request = read(LoopChangeRequest, body | changed)
        return changes.propose(session, actor, loop_id, request, services().database.now())


@pytest.fixture
def change(app: Flask, kept: Kept) -> ChangeView:
    return propose(app, kept)


def sign(person: Person, change: ChangeView, **typed: str) -> Person:
    person.open(f"/changes/{change.id}")
    person.send(f"/changes/{change.id}/sign", **typed)
    return person


def test_what_awaits_a_second_person_stands_on_the_first_page(change: ChangeView, reviewer: Person) -> None:
    page = reviewer.open("/")
    assert page.one("a", href=f"/changes/{change.id}").text == "TIC-204"
    assert "The range of the PV changes from 0 to 150 °C to 0 to 200 °C." in page.text


def test_the_page_shows_before_and_after_and_exactly_what_is_signed(
    change: ChangeView, reviewer: Person
) -> None:
    page = reviewer.open(f"/changes/{change.id}")
    assert "0 to 150 °C" in page.text
    assert "→ 0 to 200 °C" in page.text
    assert invented.LOUD in page.text
    assert page.all("script") == []
    assert page.one("input", name="content_digest").get("value") == change.content_digest
    assert [radio.get("value") for radio in page.all("input", type="radio")] == ["confirm", "reject"]
    assert not any("checked" in radio.attributes for radio in page.all("input", type="radio"))


def test_a_confirmed_change_says_who_signed_and_marks_the_gains(
    kept: Kept, change: ChangeView, reviewer: Person
) -> None:
    sign(reviewer, change, decision="confirm", reason=REASON, password=password_of("reviewer"))
    assert reviewer.status == 200
    assert "Confirmed" in reviewer.page.text
    assert "Bo Lindgren" in reviewer.page.text
    assert reviewer.page.all("form", action=f"/changes/{change.id}/sign") == []
    loop = reviewer.open(f"/loops/{kept.loops['stable']}")
    assert "✗ due for a recheck" in loop.text
    assert "0 to 200 °C" in loop.text
    home = reviewer.open("/")
    assert "Due for a recheck" in [heading.text for heading in home.all("h2")]
    submission = reviewer.open(f"/submissions/{kept.submissions['stable']}")
    assert "Recomputed again" in submission.text


def test_a_decided_change_shows_the_checkpoint_that_was_made_with_it(
    app: Flask, change: ChangeView, reviewer: Person
) -> None:
    assert "Checkpoint of the history" not in reviewer.open(f"/changes/{change.id}").text
    sign(reviewer, change, decision="reject", reason=REASON, password=password_of("reviewer"))
    with app.app_context(), services().database.reading() as session:
        decision = change_queries.find(session, CONSOLE, change.id).decision
    assert decision is not None
    assert decision.checkpoint is not None
    told = "unsigned: the service has no signing key"
    expected = f"The first {decision.entry.number} entries, {told} {decision.checkpoint.digest}"
    assert expected in reviewer.open(f"/changes/{change.id}").text


def test_what_is_missing_is_named_and_what_was_typed_is_kept(change: ChangeView, reviewer: Person) -> None:
    sign(reviewer, change, reason=REASON)
    assert reviewer.status == 422
    summary = reviewer.page.one("div", role="alert").text
    assert "Choose to confirm or to reject." in summary
    assert "Type your password to sign." in summary
    assert REASON in reviewer.page.one("textarea").text


def test_a_wrong_password_signs_nothing_and_does_not_come_back(change: ChangeView, reviewer: Person) -> None:
    sign(reviewer, change, decision="confirm", reason=REASON, password="wrong battery of somebody")
    assert reviewer.status == 403
    assert "The password is wrong. Nothing was signed." in reviewer.page.text
    assert "wrong battery" not in reviewer.page.text
    assert reviewer.page.one("input", value="confirm").get("type") == "radio"


def test_the_author_may_withdraw_and_nothing_else(change: ChangeView, author: Person) -> None:
    page = author.open(f"/changes/{change.id}")
    assert page.all("input", type="radio") == []
    author.send(f"/changes/{change.id}/sign", reason=REASON, password=password_of("author"))
    assert "Withdrawn" in author.page.text


def test_whoever_cannot_decide_reads_who_can(change: ChangeView, signed_in: SignedIn) -> None:
    page = signed_in("auditor").open(f"/changes/{change.id}")
    assert page.all("form", action=f"/changes/{change.id}/sign") == []
    assert "A reviewer other than Ada Thorne confirms or rejects this change." in page.text


def test_a_change_elsewhere_is_not_there(change: ChangeView, signed_in: SignedIn) -> None:
    elsewhere = signed_in("elsewhere")
    elsewhere.open(f"/changes/{change.id}")
    assert elsewhere.status == 404


def test_a_change_that_was_overtaken_can_only_be_rejected(
    app: Flask, kept: Kept, change: ChangeView, reviewer: Person, signed_in: SignedIn
) -> None:
    sign(
        signed_in("second"),
        propose(app, kept),
        decision="confirm",
        reason=REASON,
        password=password_of("second"),
    )
    page = reviewer.open(f"/changes/{change.id}")
    assert "The loop has changed since this was proposed." in page.text
    assert [radio.get("value") for radio in page.all("input", type="radio")] == ["reject"]


def test_a_retirement_shows_the_model_that_is_taken_out_of_force(
    app: Flask, kept: Kept, reviewer: Person
) -> None:
    change = propose(app, kept, loop=None, retire_operating_point="normal load")
    page = reviewer.open(f"/changes/{change.id}")
    assert page.one("h1").text == "Retire an operating point of TIC-204"
    assert "Two output steps." in page.text
    sign(reviewer, change, decision="confirm", reason=REASON, password=password_of("reviewer"))
    assert "(retired)" in reviewer.open(f"/loops/{kept.loops['stable']}").text
