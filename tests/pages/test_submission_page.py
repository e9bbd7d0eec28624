from __future__ import annotations

import pytest

from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept


def sections(person: Person) -> list[str]:
    return [heading.text for heading in person.page.one("main").all("h2")]


def test_the_page_is_read_in_the_order_in_which_it_is_trusted(kept: Kept, reviewer: Person) -> None:
    reviewer.open(f"/submissions/{kept.submissions['stable']}")
    assert sections(reviewer) == [
        "What changes",
        "Verdict",
        "Margins against limits",
        "Why",
        "What has happened so far",
        "Decision",
        "Facts",
    ]


def test_each_gain_stands_as_entered_before_and_after_with_its_unit_and_per_cent(
    kept: Kept, reviewer: Person
) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['stable']}")
    rows = [row.text for row in page.one("table", class_="changes").all("tr")]
    assert "Proportional (Kc) 1.60 gain → 2.00 gain +25 %" in rows
    assert "Integral (Ti) 30 seconds 30 seconds" in rows


@pytest.mark.parametrize(
    ("case", "begins"),
    [
        ("stable", "✓ Stable:"),
        ("unstable", "✗ Unstable:"),
        ("undecided", "? Undecided:"),
        ("without_model", "? Not recomputed:"),
    ],
)
def test_the_verdict_is_a_symbol_and_a_sentence(kept: Kept, reviewer: Person, case: str, begins: str) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions[case]}")
    assert page.one(class_="verdict").text.startswith(begins)


def test_a_limit_that_is_not_met_says_so_in_words(kept: Kept, reviewer: Person) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['not_met']}")
    row = next(row for row in page.all("tr") if row.text.startswith("Gain margin"))
    assert "✗" in row.text
    assert "not met" in row.text.lower()


def test_a_claim_stands_beside_what_was_recomputed(kept: Kept, reviewer: Person) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['stable']}")
    rows = [row.text.lower() for row in page.all("tr")]
    assert any(row.startswith("gain margin 9.5") and "differs" in row for row in rows)
    assert any(row.startswith("phase margin 67") and "agrees" in row for row in rows)


def test_every_figure_has_its_name_its_words_and_its_numbers(kept: Kept, reviewer: Person) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['stable']}")
    figures = page.all("figure")
    assert len(figures) == 3
    for figure in figures:
        for drawing in figure.all("svg"):
            assert drawing.get("role") == "img"
            assert drawing.one("title").text
            assert drawing.one("desc").text
        assert figure.one("figcaption").text
    assert [len(figure.all("table")) for figure in figures] == [1, 1, 0]


@pytest.mark.parametrize("case", ["unstable", "undecided", "without_model"])
def test_nobody_is_offered_to_approve_what_cannot_be_approved(
    kept: Kept, reviewer: Person, case: str
) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions[case]}")
    assert "disabled" in page.one("input", id="decision-approve").attributes
    assert "disabled" not in page.one("input", id="decision-reject").attributes
    assert "Nobody can approve these gains." in page.text


def test_neither_decision_is_chosen_beforehand(kept: Kept, reviewer: Person) -> None:
    page = reviewer.open(f"/submissions/{kept.submissions['stable']}")
    choices = page.all("input", type="radio", name="decision")
    assert [choice.get("value") for choice in choices] == ["approve", "reject"]
    assert all("checked" not in choice.attributes for choice in choices)


@pytest.mark.parametrize(
    ("person", "case", "why"),
    [
        ("author", "stable", "this needs the role reviewer"),
        ("auditor", "stable", "this needs the role reviewer"),
        ("administrator", "stable", "this needs the role reviewer"),
        ("both", "own_of_both", "whoever submitted or prepared gains neither approves nor rejects them"),
    ],
)
def test_who_cannot_decide_reads_why(
    kept: Kept, signed_in: SignedIn, person: str, case: str, why: str
) -> None:
    page = signed_in(person).open(f"/submissions/{kept.submissions[case]}")
    assert f"You cannot decide about these gains: {why}." in page.text
    assert page.all("input", name="decision") == []


def test_what_lies_outside_a_persons_areas_is_not_there(kept: Kept, signed_in: SignedIn) -> None:
    person = signed_in("elsewhere")
    for address in (
        f"/submissions/{kept.submissions['stable']}",
        f"/submissions/{kept.submissions['stable']}/sheet.pdf",
        f"/loops/{kept.loops['stable']}",
    ):
        person.open(address)
        assert person.status == 404, address
    assert "TIC-204" not in person.open("/").text
    assert "TIC-204" not in person.open("/loops").text


def test_the_sheet_is_a_pdf(kept: Kept, reviewer: Person) -> None:
    answer = reviewer.client.get(f"/submissions/{kept.submissions['stable']}/sheet.pdf")
    assert answer.mimetype == "application/pdf"
    assert answer.data.startswith(b"%PDF-")
