"""What holds for every page: valid, labelled, without any script, and nothing that was typed acts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import pytest
from flask.testing import FlaskClient
from werkzeug.datastructures import Headers

from tests.databases import Databases
from tests.pages import invented
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import CASES, LOUD, Kept
from tests.pages.markup import Element

HIDDEN = {"hidden", "submit"}
RANKS = {"h1": 1, "h2": 2, "h3": 3, "h4": 4}


@dataclass(frozen=True)
class Read:
    """A page as it was read once, for every test of this file."""

    address: str
    page: Element
    headers: Headers


def addresses(kept: Kept) -> list[str]:
    """Every page that a reviewer can read, each in all that it can show."""
    named = [
        "/",
        "/loops",
        "/loops?tag=none",
        "/submissions?state=none",
        "/history?since=none",
        "/history/20",
    ]
    for name in CASES:
        named += [f"/submissions/{kept.submissions[name]}", f"/loops/{kept.loops[name]}"]
    one = kept.submissions["stable"]
    named += ["/history/20"]
    return [*named, f"/submissions/{one}/revoke", "/nowhere", "/sign-in"]


@pytest.fixture(scope="module")
def pages(kept: Kept, databases: Databases) -> Iterator[list[Read]]:
    url = databases.copy_of(kept.url)
    app = invented.application(url)
    read = [each for who in ("reviewer", "author") for each in _read_as(who, app.test_client(), kept)]
    yield read
    invented.close(app)
    databases.drop(url)


def _read_as(who: str, client: FlaskClient, kept: Kept) -> Iterator[Read]:
    person = Person(client)
    person.sign_in(who)
    forms = [f"/submissions/{kept.submissions[name]}/installation" for name in ("stable", "two_zeros")]
    forms.append(f"/submissions/{kept.submissions['stable']}/withdraw")
    for address in addresses(kept) if who == "reviewer" else forms:
        page = person.open(address)
        assert person.answer is not None
        yield Read(address, page, person.answer.headers)


def test_every_page_is_valid_and_has_one_heading_of_the_first_rank(pages: list[Read]) -> None:
    for read in pages:
        assert len(read.page.all("h1")) == 1, read.address
        assert len(read.page.all("main")) == 1, read.address
        assert read.page.one("html").get("lang") == "en"
        assert read.page.one("head").one("title").text.endswith("· Gain sign-off")


def test_no_name_stands_twice_on_a_page(pages: list[Read]) -> None:
    for read in pages:
        ids = [element.get("id") for element in read.page.all() if element.get("id")]
        assert len(ids) == len(set(ids)), (read.address, sorted(ids))


def test_no_rank_of_heading_is_left_out(pages: list[Read]) -> None:
    for read in pages:
        ranks = [RANKS[each.tag] for each in read.page.all() if each.tag in RANKS]
        assert all(later - earlier <= 1 for earlier, later in pairwise(ranks)), read.address


def test_no_page_holds_a_script_or_a_style_of_its_own(pages: list[Read]) -> None:
    for read in pages:
        assert read.page.all("script") == read.page.all("style") == [], read.address
        for element in read.page.all():
            acting = [name for name in element.attributes if name.startswith("on") or name == "style"]
            assert acting == [], (read.address, element.tag)


def test_no_page_leads_off_this_site(pages: list[Read]) -> None:
    for read in pages:
        for element in read.page.all():
            for name in ("href", "src", "action"):
                assert element.get(name)[:1] in ("", "/", "#"), (read.address, element.get(name))


def test_every_page_forbids_scripts_and_frames_and_is_not_stored(pages: list[Read]) -> None:
    for read in pages:
        policy = read.headers["Content-Security-Policy"]
        assert "default-src 'none'; script-src 'none'" in policy
        assert "frame-ancestors 'none'" in policy
        assert "unsafe" not in policy
        assert read.headers["Cache-Control"] == "no-store"


def test_every_field_has_its_label(pages: list[Read]) -> None:
    for read in pages:
        labelled = {label.get("for") for label in read.page.all("label")}
        for field in fields(read.page):
            assert field.get("id") in labelled, (read.address, field.attributes)


def test_every_group_of_fields_has_its_legend(pages: list[Read]) -> None:
    for read in pages:
        for group in read.page.all("fieldset"):
            inside = [part.tag for part in group.content if isinstance(part, Element)]
            assert inside.count("legend") == 1, read.address


def test_every_description_that_is_named_is_there(pages: list[Read]) -> None:
    for read in pages:
        ids = {each.get("id") for each in read.page.all()}
        for name in ("aria-describedby", "aria-labelledby"):
            assert {part for each in read.page.all() for part in each.get(name).split()} <= ids, read.address


def fields(page: Element) -> list[Element]:
    found = [*page.all("input"), *page.all("textarea"), *page.all("select")]
    return [field for field in found if field.get("type") not in HIDDEN]


def test_what_a_person_typed_is_shown_and_does_not_act(kept: Kept, signed_in: SignedIn) -> None:
    reader = signed_in("auditor")
    for address in (
        f"/submissions/{kept.submissions['loud']}",
        f"/loops/{kept.loops['loud']}",
        "/",
        "/loops",
    ):
        page = reader.open(address)
        assert page.all("script") == page.all("b") == [], address
        assert LOUD in page.text, address


def test_a_name_typed_into_a_search_is_shown_and_does_not_act(reviewer: Person) -> None:
    page = reviewer.open('/loops?q="><script>alert(1)</script>')
    assert page.all("script") == []
    assert page.one("input", id="q").get("value") == '"><script>alert(1)</script>'
