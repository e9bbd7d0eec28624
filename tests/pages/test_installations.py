from __future__ import annotations

from datetime import datetime

import pytest
from sqlalchemy.orm import Session

from service.analysis.plant import FirstOrder
from service.context import services
from service.documents.installations import InstallationRequest
from service.documents.loops import ModelVersion
from service.records import installations, loops, queries
from service.records.installations import PreparedInstallation
from service.records.roles import Actor
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept
from tests.pages.test_decisions import decide

AS_TYPED = {
    "found-action": "reverse",
    "found-proportional-value": "1.60",
    "found-integral-value": "30",
    "left-action": "reverse",
    "left-proportional-value": "2.00",
    "left-integral-value": "30",
    "left-recorded-0": "95",
    "saved_to_engineering_database": "yes",
}


@pytest.fixture
def approved(kept: Kept, reviewer: Person) -> str:
    submission = kept.submissions["stable"]
    decide(reviewer, "reviewer", submission, "approve")
    return submission


def install(person: Person, submission: str, **typed: str) -> None:
    address = f"/submissions/{submission}/installation"
    person.open(address)
    person.send(f"{address}?set=0", **(AS_TYPED | typed))


def test_as_left_like_the_approved_gains_puts_them_in_force(approved: str, author: Person) -> None:
    install(author, approved)
    assert "✓ As left is as approved." in author.page.text
    assert "The gains are now in force." in author.page.text


def test_the_same_gains_read_in_other_units_are_the_approved_ones(approved: str, author: Person) -> None:
    other = {"left-proportional-unit": "percent_band", "left-proportional-value": "50"}
    install(author, approved, **other, **{"left-integral-unit": "minutes", "left-integral-value": "0.5"})
    assert "✓ As left is as approved." in author.page.text


def test_as_left_otherwise_is_recorded_with_the_difference(approved: str, author: Person) -> None:
    install(author, approved, **{"left-integral-value": "3.0"})
    assert "✗ As left is not as approved." in author.page.text
    assert "Integral 30 seconds 3 seconds" in [row.text for row in author.page.all("tr")]
    assert "approved and not yet installed" in author.page.text
    told = author.open(f"/submissions/{approved}").one("section", aria_labelledby="so-far").text
    assert "Installed otherwise than approved" in told
    assert "Integral: approved 30 seconds, left 3 seconds" in told


def test_what_is_no_number_is_named_with_its_field_and_everything_typed_is_kept(
    approved: str, author: Person
) -> None:
    install(author, approved, **{"left-proportional-value": "2,00", "typed_by": "Uma <Reyes>"})
    assert author.status == 422
    link = author.page.one(id="problems").one("a")
    assert link.get("href") == "#left-proportional-value"
    assert link.text.startswith("As left, proportional: Write a number")
    assert author.page.one("input", id="left-proportional-value").get("value") == "2,00"
    assert author.page.one("input", id="typed_by").get("value") == "Uma <Reyes>"
    assert author.page.one("input", id="found-integral-value").get("value") == "30"


def test_an_action_that_nobody_read_is_asked_for(approved: str, author: Person) -> None:
    address = f"/submissions/{approved}/installation"
    author.open(address)
    typed = {name: value for name, value in AS_TYPED.items() if name != "left-action"}
    author.send(f"{address}?set=0", **typed)
    assert author.status == 422
    assert "#left-action" in [link.get("href") for link in author.page.one(id="problems").all("a")]


def test_a_time_that_is_yet_to_come_is_refused_at_its_field(approved: str, author: Person) -> None:
    install(author, approved, installed_at="2199-01-01T08:00")
    assert author.status == 422
    assert author.page.one(id="problems").one("a").get("href") == "#installed_at"


def test_gains_with_two_zeros_are_typed_as_such(kept: Kept, reviewer: Person, author: Person) -> None:
    submission = kept.submissions["two_zeros"]
    decide(reviewer, "reviewer", submission, "approve")
    address = f"/submissions/{submission}/installation"
    author.open(address)
    typed = {
        f"{side}-{name}": value
        for side in ("found", "left")
        for name, value in {
            "action": "reverse",
            "gain": "1.5",
            "zeros_rad_s-0": "-0.05",
            "zeros_rad_s-1": "-0.2",
            "derivative_filter-value": "0.5",
        }.items()
    }
    author.send(f"{address}?set=0", **typed)
    assert "✓ As left is as approved." in author.page.text


@pytest.mark.parametrize("person", ["reviewer", "auditor", "administrator"])
def test_who_does_not_install_is_told_so(kept: Kept, signed_in: SignedIn, person: str) -> None:
    reader = signed_in(person)
    reader.open(f"/submissions/{kept.submissions['stable']}/installation")
    assert reader.status == 403
    assert "This needs the role submitter." in reader.page.text


def test_a_wrong_number_is_told_on_the_loop_and_on_the_first_page(
    approved: str, kept: Kept, reviewer: Person, author: Person
) -> None:
    install(author, approved, **{"left-proportional-value": "20.0"})
    loop = author.open(f"/loops/{kept.loops['stable']}")
    assert "✗ left otherwise Other gains than approved were left in the controller" in loop.text
    assert "By the record these should run since" in loop.text
    (differs,) = (link for link in loop.all("a") if link.text == "what differs")
    assert "✗ As left is not as approved." in author.open(differs.get("href")).text
    home = reviewer.open("/")
    assert "Left otherwise than approved" in [heading.text for heading in home.all("h2")]
    install(author, approved)
    assert "left otherwise" not in author.open(f"/loops/{kept.loops['stable']}").text
    assert "Left otherwise than approved" not in reviewer.open("/").text


UNSTABLE = "✗ Unstable with the gains as left: the loop does not come to rest, it swings up or runs away."


def test_an_unstable_loop_is_told_in_words_on_every_page_that_tells_of_it(
    approved: str, kept: Kept, reviewer: Person, author: Person
) -> None:
    install(author, approved, **{"left-proportional-value": "20.0"})
    made = author.page
    assert [each.text for each in made.all("p") if "verdict" in each.get("class")] == [
        "✗ As left is not as approved.",
        UNSTABLE,
    ]
    assert "Tell the operator of this loop now. These gains were computed, not approved." in made.text
    assert "Do not enter these gains" not in made.text
    assert "The submitted gains are now approved and not yet installed." in made.text
    for address in (f"/loops/{kept.loops['stable']}", f"/submissions/{approved}"):
        told = author.open(address)
        assert next(each.text for each in told.all("p") if each.get("class") == "verdict against") == UNSTABLE
        assert "computed, not approved" in told.text
    happened = author.page.one("section", aria_labelledby="so-far").text
    assert UNSTABLE[2:] in happened
    (row,) = (
        row for row in reviewer.open("/").all("tr") if "✗ unstable" in row.text and "TIC-204" in row.text
    )
    assert "Approved and not yet installed" in row.text


def test_what_is_stable_and_misses_limits_says_so(approved: str, reviewer: Person, author: Person) -> None:
    install(author, approved, **{"left-proportional-value": "6.0"})
    assert "✓ Stable with the gains as left" in author.page.text
    assert "Computed, not approved." in author.page.text
    (limit,) = (
        each.text for each in author.page.all("li") if each.text.startswith("Gain margin at least 2: 1.")
    )
    assert limit.endswith("not met.")
    (row,) = (row for row in reviewer.open("/").all("tr") if "✗ not all limits met" in row.text)
    assert "✓ stable" in row.text


def test_what_stays_within_every_limit_is_calm_and_not_approved(approved: str, author: Person) -> None:
    install(author, approved, **{"left-proportional-value": "1.90"})
    assert "✓ Stable with the gains as left" in author.page.text
    assert "Computed, not approved." in author.page.text
    assert "Tell the operator" not in author.page.text


def test_later_gains_for_the_loop_are_read_with_what_runs_now(
    approved: str, kept: Kept, reviewer: Person, author: Person
) -> None:
    install(author, approved, **{"left-proportional-value": "20.0"})
    found = reviewer.open(f"/loops/{kept.loops['stable']}")
    addresses = {link.get("href") for link in found.all("a") if link.get("href").startswith("/submissions/")}
    (baseline,) = (each for each in addresses if each.count("/") == 2 and approved not in each)
    assert UNSTABLE in reviewer.open(baseline).text
    install(author, approved)
    assert UNSTABLE not in reviewer.open(baseline).text


def test_what_moved_while_the_form_was_read_gives_it_back_with_what_was_typed(
    approved: str, author: Person, monkeypatch: pytest.MonkeyPatch
) -> None:
    prepare = installations.prepare

    def and_then_a_model_is_added(
        session: Session, actor: Actor, submission_id: str, request: InstallationRequest, now: datetime
    ) -> PreparedInstallation:
        prepared = prepare(session, actor, submission_id, request, now)
        loop_id = queries.submission(session, actor, submission_id, now).content.loop_id
        plant = FirstOrder(kind="first_order", gain=2.4, time_constant_s=30.0, dead_time_s=5.0)
        model = ModelVersion(plant_model=plant, operating_point="normal load", evidence="Once more.")
        with services().database.writing() as writing:
            loops.add_model(writing, actor, loop_id, model, now)
        return prepared

    monkeypatch.setattr(installations, "prepare", and_then_a_model_is_added)
    install(author, approved, **{"left-proportional-value": "6.0", "typed_by": "Uma Reyes"})
    assert author.status == 409
    assert "the plant models changed; record the installation again" in author.page.one(id="problems").text
    assert author.page.one("input", id="left-proportional-value").get("value") == "6.0"
    assert author.page.one("input", id="typed_by").get("value") == "Uma Reyes"
    monkeypatch.undo()
    author.send(
        f"/submissions/{approved}/installation?set=0", **{"left-action": "reverse", "found-action": "reverse"}
    )
    assert UNSTABLE in author.page.text
