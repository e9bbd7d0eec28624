from __future__ import annotations

import logging

import pytest

from tests.databases import Databases, PostgresqlDatabases, without_guards
from tests.pages import invented
from tests.pages.conftest import Person
from tests.pages.invented import Kept


def test_a_page_that_is_not_there_names_the_request(reviewer: Person) -> None:
    page = reviewer.open("/nowhere")
    assert reviewer.status == 404
    assert page.one("h1").text == "There is no such page"
    assert reviewer.answer is not None
    assert reviewer.answer.headers["X-Request-Id"] in page.text
    assert "Bo Lindgren" in page.one("header").text


def test_a_method_that_an_address_does_not_take_is_told_calmly(reviewer: Person) -> None:
    reviewer.answer = reviewer.client.post("/loops", data={})
    assert reviewer.status == 405
    assert "GET" in reviewer.answer.headers["Allow"]
    assert "This address takes no such request" in reviewer.page.text


def test_a_fault_of_ours_shows_the_requests_name_and_nothing_of_the_fault(
    url: str, reviewer: Person, caplog: pytest.LogCaptureFixture
) -> None:
    # a real fault: somebody has removed a table behind the service's back
    without_guards(url, "DROP TABLE loop_revisions")
    with caplog.at_level(logging.CRITICAL):
        page = reviewer.open("/loops")
    assert reviewer.status in (500, 503)
    assert reviewer.answer is not None
    assert reviewer.answer.headers["X-Request-Id"] in page.text
    assert "loop_revisions" not in reviewer.answer.text
    assert "Traceback" not in reviewer.answer.text


@pytest.mark.parametrize("databases", ["postgresql"], indirect=True)
def test_a_store_that_is_read_only_is_read_and_says_that_nothing_was_recorded(
    url: str, reviewer: Person, databases: PostgresqlDatabases, caplog: pytest.LogCaptureFixture
) -> None:
    # the use of the session is due to be noted
    without_guards(url, "UPDATE sign_in_sessions SET last_used_at = last_used_at - interval '5 minutes'")
    with databases.read_only(url), caplog.at_level(logging.CRITICAL):
        for _ in range(3):
            # a connection that was ended is told by its first use
            page = reviewer.open("/loops")
        assert (reviewer.status, page.one("h1").text) == (200, "Loops")
        page = Person(reviewer.client.application.test_client()).sign_in("author")
        assert page.one("h1").text == "The records cannot be reached"
    page = Person(reviewer.client.application.test_client()).sign_in("author")
    assert "Ada Thorne" in page.one("header").text


def test_more_than_any_form_needs_is_refused(reviewer: Person, kept: Kept) -> None:
    reviewer.answer = reviewer.client.post(
        f"/submissions/{kept.submissions['stable']}/confirm", data={"reason": "x" * 1_100_000}
    )
    assert reviewer.status == 413
    assert "This is too long" in reviewer.page.text


def test_a_demonstration_says_so_on_every_page(databases: Databases) -> None:
    kept = invented.make_store(databases.new(), demonstration=True)
    app = invented.application(kept.url)
    person = Person(app.test_client())
    for address in ("/sign-in", "/nowhere"):
        assert "everything here is invented" in person.open(address).text
    person.sign_in("reviewer")
    for address in ("/", "/loops", "/history", f"/submissions/{kept.submissions['stable']}"):
        assert "everything here is invented" in person.open(address).text
    invented.close(app)
    databases.drop(kept.url)


def test_a_store_in_use_does_not_call_itself_a_demonstration(reviewer: Person) -> None:
    assert "everything here is invented" not in reviewer.open("/").text
