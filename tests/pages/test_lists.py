from __future__ import annotations

import hashlib

import pytest

from service.pages import history
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import Kept


def tags(person: Person) -> list[str]:
    return [link.text for row in person.page.all("tbody") for link in row.all("a")]


def numbers(person: Person) -> list[int]:
    """The entries of the history that a page shows."""
    return [int(header.text) for header in person.page.all("th", scope="row")]


def test_the_first_page_shows_what_awaits_review(reviewer: Person) -> None:
    reviewer.open("/")
    assert {"TIC-204", "FIC-205", "LIC-206"} <= set(tags(reviewer))
    row = next(row for row in reviewer.page.all("tr") if row.text.startswith("FIC-205"))
    assert "✗ unstable" in row.text
    assert "Awaiting review" in row.text


def test_loops_are_found_by_tag_area_and_word(reviewer: Person) -> None:
    reviewer.open("/loops?tag=tic-204")
    assert tags(reviewer) == ["TIC-204"]
    reviewer.open("/loops?q=wash")
    assert "TIC-204" in tags(reviewer)
    reviewer.open("/loops?area=Nowhere")
    assert "No loop matches." in reviewer.page.text


@pytest.mark.parametrize(
    "path", ["/loops?q=%00", "/loops?tag=TIC-%00204", "/submissions?site=%00", "/history?actor=%00"]
)
def test_a_null_character_is_no_part_of_a_search(reviewer: Person, path: str) -> None:
    reviewer.open(path)
    assert reviewer.status == 200


def test_a_loop_shows_ranges_models_gains_in_force_and_its_submissions(kept: Kept, reviewer: Person) -> None:
    page = reviewer.open(f"/loops/{kept.loops['stable']}")
    told = page.one("main").text
    assert "0 to 150 °C" in told
    assert "first order" in told
    assert "Proportional (Kc) 1.60 gain" in told
    assert "gains as found, recorded as found" in told.lower()
    assert "Planned change" in tags(reviewer)


def test_submissions_are_listed_by_state(reviewer: Person) -> None:
    reviewer.open("/submissions?state=recorded")
    assert all("Recorded as found" in row.text for row in reviewer.page.one("tbody").all("tr"))
    page = reviewer.open("/submissions?state=invented")
    assert "There is no such state." in page.one(id="problems").text


def test_the_history_is_filtered_by_tag_kind_account_and_day(reviewer: Person) -> None:
    page = reviewer.open("/history?tag=TIC-204&kind=gains_submitted&actor=author&since=2020-01-01")
    rows = page.one("tbody").all("tr")
    assert len(rows) == 2
    assert all("Gains submitted" in row.text and "TIC-204" in row.text for row in rows)
    assert "No entry matches." in reviewer.open("/history?tag=TIC-204&until=2020-01-01").text


def test_a_kind_is_chosen_among_those_there_are(reviewer: Person) -> None:
    page = reviewer.open("/history?kind=approval_revoked")
    chosen = [option.text for option in page.all("option") if "selected" in option.attributes]
    assert chosen == ["approval revoked"]
    page = reviewer.open("/history?kind=gains_repealed")
    assert page.one(id="problems").one("a").get("href") == "#kind"
    assert page.one(id="kind-problem").text == "✗ There is no such kind of entry."


def test_a_day_that_is_none_is_named(reviewer: Person) -> None:
    page = reviewer.open("/history?since=yesterday")
    assert page.one(id="problems").one("a").get("href") == "#since"
    assert page.one("input", id="since").get("value") == "yesterday"


def test_an_entry_shows_the_very_bytes_that_its_digest_is_made_from(kept: Kept, signed_in: SignedIn) -> None:
    reader = signed_in("auditor")
    reader.open("/history?tag=TIC-204&kind=gains_submitted")
    number = tags(reader)[0]
    page = reader.open(f"/history/{number}")
    shown = "".join(part for part in page.one("pre").content if isinstance(part, str))
    digest = hashlib.sha256(b"\x00" + shown.encode()).hexdigest()
    assert digest in page.text


def test_a_long_list_is_read_part_by_part_and_an_address_made_up_is_refused(
    signed_in: SignedIn, monkeypatch: pytest.MonkeyPatch
) -> None:
    reader = signed_in("auditor")
    monkeypatch.setattr(history, "SHOWN", 20)
    reader.open("/history?since=2020-01-01")
    seen = numbers(reader)
    following = reader.page.all("a", rel="next")
    while following:
        assert "since=2020-01-01" in following[0].get("href")
        reader.open(following[0].get("href"))
        seen += numbers(reader)
        following = reader.page.all("a", rel="next")
    # the latest first, each entry once
    assert seen == list(range(seen[0], 0, -1))
    assert len(seen) > 40
    reader.open("/history?after=1")
    assert reader.status == 400
