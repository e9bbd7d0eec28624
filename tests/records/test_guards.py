"""The database itself refuses what must not happen, whoever asks it; see also the tests of the history."""

from __future__ import annotations

import pytest
from sqlalchemy.exc import DBAPIError

from service.records.views import LoopView
from tests.databases import is_sqlite, opened, run
from tests.records.store import WIDER, Store, gains

OTHER = "f" * 32

sqlite_alone = pytest.mark.parametrize("databases", ["sqlite"], indirect=True)
"""PostgreSQL has no INSERT OR REPLACE; its ON CONFLICT is an UPDATE."""

REPLACED = (
    "INSERT OR REPLACE INTO accounts (id, name, full_name, password_hash, created_at)"
    " SELECT {id}, {name}, full_name, password_hash, created_at FROM accounts WHERE name = 'reviewer'"
)


def _refused(store: Store, statement: str, match: str) -> None:
    with opened(store.url) as connection, pytest.raises(DBAPIError, match=match):
        run(connection, statement)


@pytest.mark.parametrize("change", ["name = 'x' || name", f"id = '{OTHER}'"])
def test_an_account_keeps_its_name_and_its_identifier(store: Store, change: str) -> None:
    statement = f"UPDATE accounts SET {change} WHERE name = 'reviewer'"  # noqa: S608  our own columns
    _refused(store, statement, r"keeps its name|accounts is append-only")


def test_an_account_is_not_deleted(store: Store) -> None:
    _refused(store, "DELETE FROM accounts WHERE name = 'reviewer'", r"not deleted|accounts is append-only")
    if not is_sqlite(store.url):
        _refused(store, "TRUNCATE accounts CASCADE", "accounts is append-only")


@sqlite_alone
@pytest.mark.parametrize("other", [{"id": f"'{OTHER}'"}, {"name": "'another'"}, {}])
def test_an_account_is_not_replaced_by_one_of_its_name_or_its_identifier(
    store: Store, other: dict[str, str]
) -> None:
    _refused(store, REPLACED.format(**{"id": "id", "name": "name"} | other), "not deleted")


def test_what_else_an_account_has_may_change(store: Store) -> None:
    with opened(store.url) as connection:
        run(connection, "UPDATE accounts SET full_name = 'Another' WHERE name = 'reviewer'")
        assert run(connection, "SELECT name FROM accounts WHERE full_name = 'Another'") == [("reviewer",)]


@sqlite_alone
@pytest.mark.parametrize(
    ("identifier", "tag", "is_refused"),
    [(f"'{OTHER}'", "tag_key", True), ("id", "'x'", True), (f"'{OTHER}'", "'x'", False)],
)
def test_a_kept_row_is_not_replaced_by_one_that_has_any_of_its_keys(
    store: Store, loop: LoopView, identifier: str, tag: str, is_refused: bool
) -> None:
    columns = f"{identifier}, site, tag, site_key, {tag}, event_number"
    statement = f"INSERT OR REPLACE INTO loops SELECT {columns} FROM loops"  # noqa: S608  our own columns
    if is_refused:
        _refused(store, statement, "append-only")
    else:
        with opened(store.url) as connection:
            run(connection, statement)
        assert store.counts()["loops"] == 2


def test_an_author_decides_on_what_others_have_made(store: Store, loop: LoopView) -> None:
    store.submit("colleague")
    theirs = store.submit("submitter", controller=gains(1.1))
    store.approve(theirs, "colleague")
    assert store.read(theirs).state == "approved"


def test_authors_withdraw_what_is_their_own(store: Store, loop: LoopView) -> None:
    submission, change = store.submit("colleague"), store.propose(loop, "colleague")
    store.decide(submission, "withdraw", "colleague")
    assert store.read(submission).state == "withdrawn"
    assert store.decide_change(change, "withdraw", "colleague").state == "withdrawn"


def test_whoever_proposed_a_change_confirms_one_that_another_proposed(store: Store, loop: LoopView) -> None:
    store.propose(loop, "colleague")
    other = store.register(tag="LIC-7")
    assert (
        store.decide_change(store.propose(other, tag="LIC-7", pv=WIDER), person="colleague").state
        == "confirmed"
    )
