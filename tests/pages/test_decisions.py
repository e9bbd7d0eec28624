from __future__ import annotations

import hashlib
import json

import pytest
import rfc8785
from flask import Flask
from sqlalchemy import text

from service.context import services
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept, password_of

REASON = "Margins are ample.\nWatch the first hour <closely>."


def begin(person: Person, submission: str, **typed: str) -> None:
    person.open(f"/submissions/{submission}")
    person.send(f"/submissions/{submission}/confirm", **typed)


def sign(person: Person, submission: str, password: str) -> None:
    person.send(f"/submissions/{submission}/sign", password=password)


def decide(person: Person, who: str, submission: str, decision: str, **typed: str) -> None:
    begin(person, submission, decision=decision, reason=REASON, **typed)
    sign(person, submission, password_of(who))


def count(app: Flask, table: str) -> int:
    with app.app_context(), services().database.reading() as session:
        found: int = session.execute(text(f"SELECT count(*) FROM {table}")).scalar_one()  # noqa: S608
        return found


def kinds(app: Flask) -> list[str]:
    with app.app_context(), services().database.reading() as session:
        return list(session.execute(text("SELECT kind FROM history_events ORDER BY number")).scalars())


def test_nothing_is_signed_before_the_decision_is_read_back(app: Flask, kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["stable"]
    page = reviewer.open(f"/submissions/{submission}")
    digest = page.one("input", name="content_digest").get("value")
    entries = kinds(app)
    page = reviewer.send(f"/submissions/{submission}/confirm", decision="approve", reason=REASON)
    assert page.one("h1").text == "Read back what you sign"
    assert digest in page.text
    assert "Bo Lindgren is about to approve these gains for TIC-204 at Vanholm." in page.text
    assert "Watch the first hour <closely>." in page.text
    assert kinds(app) == entries


def test_the_digest_is_that_of_the_fields_that_are_shown(kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["loud"]
    begin(reviewer, submission, decision="approve", reason=REASON)
    shown = "".join(part for part in reviewer.page.one("pre").content if isinstance(part, str))
    assert rfc8785_digest(shown) == reviewer.page.one("dd", class_="digest").text


def rfc8785_digest(shown: str) -> str:
    return hashlib.sha256(rfc8785.dumps(json.loads(shown))).hexdigest()


def test_an_approval_is_signed_with_the_password_and_kept_with_its_sheet(
    kept: Kept, reviewer: Person
) -> None:
    submission = kept.submissions["stable"]
    decide(reviewer, "reviewer", submission, "approve")
    assert reviewer.status == 200
    page = reviewer.page
    assert page.one("h1").text == "Signed and recorded"
    assert "Bo Lindgren approved these gains" in page.text
    assert "approved and not yet installed" in page.text
    assert "unsigned: the service has no signing key" in page.text
    sheet = reviewer.client.get(f"/submissions/{submission}/sheet.pdf?as_signed=true")
    assert sheet.data.startswith(b"%PDF-")


def test_the_signature_stands_on_the_submission_with_name_time_and_meaning(
    kept: Kept, reviewer: Person
) -> None:
    submission = kept.submissions["stable"]
    decide(reviewer, "reviewer", submission, "approve")
    page = reviewer.open(f"/submissions/{submission}")
    told = page.one("section", aria_labelledby="so-far").text
    assert "Approved, Bo Lindgren, " in told
    assert "UTC" in told
    assert "I have reviewed these gains and what was recomputed" in told
    assert "Watch the first hour <closely>." in told


def test_a_wrong_password_signs_nothing_keeps_what_was_typed_and_leaves_its_trace(
    app: Flask, kept: Kept, reviewer: Person
) -> None:
    submission = kept.submissions["stable"]
    begin(reviewer, submission, decision="approve", reason=REASON)
    sign(reviewer, submission, "not the password at all")
    assert reviewer.status == 403
    assert "The password is wrong. Nothing was signed." in reviewer.page.one(id="problems").text
    assert reviewer.page.one("input", id="password").get("value") == ""
    assert "not the password at all" not in reviewer.page.text
    assert kinds(app)[-1] == "signing_refused"
    assert count(app, "decisions") == 0
    sign(reviewer, submission, password_of("reviewer"))
    assert "Signed and recorded" in reviewer.page.text


def test_no_password_signs_nothing(app: Flask, kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["stable"]
    begin(reviewer, submission, decision="approve", reason=REASON)
    sign(reviewer, submission, "")
    assert reviewer.status == 422
    assert "Type your password to sign." in reviewer.page.text
    assert count(app, "decisions") == 0


def test_an_empty_form_names_what_is_missing_and_leads_to_it(kept: Kept, reviewer: Person) -> None:
    begin(reviewer, kept.submissions["stable"])
    assert reviewer.status == 422
    links = reviewer.page.one(id="problems").all("a")
    assert [(link.get("href"), link.text) for link in links] == [
        ("#decision", "Choose to approve or to reject."),
        ("#reason", "Give the reason for your decision."),
    ]
    ids = {element.get("id") for element in reviewer.page.all()}
    assert {"decision", "reason"} <= ids


def test_what_was_typed_is_kept_when_something_is_missing(kept: Kept, reviewer: Person) -> None:
    begin(reviewer, kept.submissions["stable"], reason=REASON)
    assert reviewer.status == 422
    assert "Watch the first hour <closely>." in reviewer.page.one("textarea", id="reason").text
    begin(reviewer, kept.submissions["stable"], decision="reject")
    assert "checked" in reviewer.page.one("input", id="decision-reject").attributes


def test_going_back_from_the_confirm_step_keeps_everything(kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["not_met"]
    deviation = "deviation-gain_margin_min"
    begin(reviewer, submission, decision="approve", reason=REASON, **{deviation: "Agreed for the summer."})
    page = reviewer.send(f"/submissions/{submission}/confirm", change="yes")
    assert "checked" in page.one("input", id="decision-approve").attributes
    assert page.one("textarea", id=deviation).text == "Agreed for the summer."


def test_an_approval_answers_for_each_limit_that_is_not_met(app: Flask, kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["not_met"]
    begin(reviewer, submission, decision="approve", reason=REASON)
    assert reviewer.status == 422
    link = reviewer.page.one(id="problems").one("a")
    assert link.get("href") == "#deviation-gain_margin_min"
    assert "gain margin at least 6" in link.text
    decide(
        reviewer, "reviewer", submission, "approve", **{"deviation-gain_margin_min": "Agreed for the summer."}
    )
    assert "Agreed for the summer." in reviewer.page.text
    assert count(app, "decisions") == 1


def test_a_rejection_needs_no_deviation(kept: Kept, reviewer: Person) -> None:
    decide(reviewer, "reviewer", kept.submissions["not_met"], "reject")
    assert "Bo Lindgren rejected these gains" in reviewer.page.text


def test_an_unstable_loop_is_not_approved_even_by_a_form_made_by_hand(
    app: Flask, kept: Kept, reviewer: Person
) -> None:
    submission = kept.submissions["unstable"]
    decide(reviewer, "reviewer", submission, "approve")
    assert reviewer.status in (409, 422)
    assert count(app, "decisions") == 0


def test_another_content_than_was_read_is_not_signed(app: Flask, kept: Kept, reviewer: Person) -> None:
    submission = kept.submissions["stable"]
    reviewer.open(f"/submissions/{submission}")
    reviewer.send(
        f"/submissions/{submission}/confirm", decision="approve", reason=REASON, content_digest="0" * 64
    )
    assert reviewer.status == 412
    assert "not the present content any more" in reviewer.page.text
    assert "Watch the first hour <closely>." in reviewer.page.one("textarea", id="reason").text
    assert count(app, "decisions") == 0


def test_ones_own_gains_are_not_approved_even_by_a_form_made_by_hand(
    app: Flask, kept: Kept, signed_in: SignedIn
) -> None:
    person, submission = signed_in("both"), kept.submissions["own_of_both"]
    page = person.open(f"/submissions/{submission}")
    digest = page.one("dd", class_="digest").text
    token = page.all("input", name="token")[0].get("value")
    typed = {"decision": "approve", "reason": REASON, "content_digest": digest, "token": token}
    typed["password"] = password_of("both")
    person.answer = person.client.post(f"/submissions/{submission}/sign", data=typed)
    assert person.status == 403
    assert "whoever submitted or prepared gains neither approves nor rejects them" in person.page.text.lower()
    assert count(app, "decisions") == 0
    assert kinds(app)[-1] == "signing_refused"


def test_a_safety_related_loop_takes_two_people(kept: Kept, signed_in: SignedIn) -> None:
    first, second, submission = signed_in("reviewer"), signed_in("second"), kept.submissions["safety"]
    assert "2 approvals by 2 people" in first.open(f"/submissions/{submission}").text
    decide(first, "reviewer", submission, "approve")
    assert "They are now awaiting review." in first.page.text
    assert "They need a second approval, by another person." in first.open(f"/submissions/{submission}").text
    decide(second, "second", submission, "approve")
    assert "They are now approved and not yet installed." in second.page.text


def test_whoever_submitted_can_withdraw(kept: Kept, author: Person) -> None:
    submission = kept.submissions["stable"]
    author.open(f"/submissions/{submission}/withdraw")
    author.send(f"/submissions/{submission}/confirm", reason="Found the sticking valve instead.")
    assert "Ada Thorne is about to withdraw these gains" in author.page.text
    sign(author, submission, password_of("author"))
    assert "Ada Thorne withdrew these gains" in author.page.text
    page = author.open(f"/submissions/{submission}")
    assert "Nothing is left to decide: these gains are withdrawn." in page.text


def test_a_withdrawal_without_a_reason_comes_back_to_its_own_page(kept: Kept, author: Person) -> None:
    submission = kept.submissions["stable"]
    author.open(f"/submissions/{submission}/withdraw")
    author.send(f"/submissions/{submission}/confirm", reason="")
    assert author.status == 422
    assert author.page.one("h1").text == "Withdraw these gains"


def test_a_reviewer_can_revoke_an_approval(kept: Kept, signed_in: SignedIn) -> None:
    first, second, submission = signed_in("reviewer"), signed_in("second"), kept.submissions["stable"]
    decide(first, "reviewer", submission, "approve")
    second.open(f"/submissions/{submission}/revoke")
    second.send(f"/submissions/{submission}/confirm", reason="The new pump changes everything.")
    sign(second, submission, password_of("second"))
    assert "Cara Novak revoked the approval of these gains" in second.page.text


def test_a_decision_is_made_once(kept: Kept, signed_in: SignedIn) -> None:
    first, second, submission = signed_in("reviewer"), signed_in("second"), kept.submissions["stable"]
    begin(second, submission, decision="reject", reason=REASON)
    decide(first, "reviewer", submission, "approve")
    sign(second, submission, password_of("second"))
    assert second.status == 409
    assert second.page.one("h1").text == "The present state does not allow this"


@pytest.mark.parametrize("step", ["confirm", "sign"])
def test_the_address_of_a_step_leads_back_to_the_submission(kept: Kept, reviewer: Person, step: str) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['stable']}/{step}")
    assert page.one("h1").text == "Planned change for TIC-204"


@pytest.mark.parametrize(
    ("person", "step", "status"),
    [
        ("auditor", "withdraw", 403),
        ("reviewer", "withdraw", 403),
        ("author", "revoke", 403),
        ("second", "revoke", 409),
    ],
)
def test_a_step_that_is_not_open_is_not_asked_for(
    kept: Kept, signed_in: SignedIn, person: str, step: str, status: int
) -> None:
    reader = signed_in(person)
    reader.open(f"/submissions/{kept.submissions['stable']}/{step}")
    assert reader.status == status
    assert reader.page.all("textarea") == []
