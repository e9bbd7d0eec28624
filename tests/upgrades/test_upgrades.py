"""What a plant has kept for years is brought up by a new version, and still verifies."""

from __future__ import annotations

from collections.abc import Iterator
from typing import get_args

import pytest
from alembic.script import ScriptDirectory

from service.issuing import sheets
from service.records import change_queries, migrating, queries
from service.records.change_queries import ChangeFilter
from service.records.event_kinds import EventKind
from service.records.queries import SubmissionFilter
from service.verification.verifier import Checkpoint, verify
from tests.databases import Databases, opened, run
from tests.records.store import START, Store, gains
from tests.upgrades import keeping

BEFORE_CHECKPOINTS = ("2026_12_01_first_tables", "2026_12_01_second_person")
BEFORE_CHECKPOINTS_OF_CHANGES = (*BEFORE_CHECKPOINTS, "2026_12_01_checkpoints")

REVISIONS = [script.revision for script in ScriptDirectory.from_config(migrating._config()).walk_revisions()]


@pytest.fixture(params=REVISIONS)
def kept(request: pytest.FixtureRequest, databases: Databases) -> Iterator[str]:
    url = databases.new()
    keeping.put_back(request.param, url)
    yield url
    databases.drop(url)


def _first_entry(url: str) -> bytes:
    with opened(url) as connection:
        ((canonical,),) = run(connection, "SELECT canonical FROM history_events WHERE number = 1")
    return bytes(canonical)


@pytest.mark.parametrize("revision", REVISIONS)
def test_there_is_a_store_of_every_revision(revision: str) -> None:
    assert keeping.file_of(revision).exists(), "python -m tests.upgrades.keeping writes it"


def test_a_store_of_an_earlier_revision_is_brought_up_and_still_verifies(kept: str) -> None:
    before = verify(kept)
    assert before.holds, before.fault
    assert before.rows > 20
    migrating.migrate(kept, now=START)
    after = verify(kept, checkpoint=Checkpoint(size=before.entries, root=before.root))
    assert after.holds, after.fault
    assert (after.entries, after.root) == (before.entries, before.root)


def test_every_kind_of_entry_that_was_ever_written_can_be_asked_for(kept: str) -> None:
    with opened(kept) as connection:
        kinds = {kind for (kind,) in run(connection, "SELECT kind FROM history_events")}
    assert len(kinds) > 8
    assert kinds <= set(get_args(EventKind))


def test_a_store_that_was_brought_up_is_as_one_that_was_made_new(kept: str, databases: Databases) -> None:
    migrating.migrate(kept, now=START)
    new = databases.new()
    migrating.migrate(new, now=START)
    assert _guards(kept) == _guards(new)
    databases.drop(new)


def test_a_signature_from_before_checkpoints_were_kept_says_so_on_its_sheet(kept: str) -> None:
    is_older = keeping.revision_of(kept) in BEFORE_CHECKPOINTS
    migrating.migrate(kept, now=START)
    store = Store(kept)
    auditor, told, decisions = store.actor("auditor"), [], 0
    with store.database.reading() as session:
        for line in queries.submissions(session, auditor, SubmissionFilter(), START).items:
            view = queries.submission(session, auditor, line.id, START)
            told += sheets.content(session, auditor, view).checkpoint
            decisions += bool(view.decisions)
    store.database.close()
    none_kept = "No checkpoint of the history was kept with the signature of entry"
    kept_with_one = 0 if is_older else 1
    assert sum(sentence.startswith("Checkpoint of entries") for sentence in told) == kept_with_one
    assert sum(sentence.startswith(none_kept) for sentence in told) == decisions - kept_with_one > 0


def test_a_decision_on_a_change_from_before_they_were_kept_with_it_has_none(kept: str) -> None:
    kept_with_one = 0 if keeping.revision_of(kept) in BEFORE_CHECKPOINTS_OF_CHANGES else 1
    migrating.migrate(kept, now=START)
    store = Store(kept)
    with store.database.reading() as session:
        found = change_queries.changes(session, store.actor("auditor"), ChangeFilter()).items
    store.database.close()
    checkpoints = [each.decision.checkpoint for each in found if each.decision is not None]
    assert len([each for each in checkpoints if each is not None]) == kept_with_one
    report = verify(kept)
    assert (report.holds, report.notes) == (True, ())


def _guards(url: str) -> list[tuple[str, ...]]:
    """Every trigger with what it does."""
    with opened(url) as connection:
        if connection.dialect.name == "sqlite":
            query = "SELECT name, sql FROM sqlite_master WHERE type = 'trigger'"
        else:
            query = "SELECT tgname, pg_get_triggerdef(oid), tgenabled FROM pg_trigger WHERE NOT tgisinternal"
        return sorted(tuple(map(str, row)) for row in run(connection, query))


def test_work_goes_on_in_a_store_that_was_brought_up(kept: str) -> None:
    migrating.migrate(kept, now=START)
    store = Store(kept)
    store.clock.forward(days=2)
    try:
        store.register(tag="PIC-9")
        store.submit(controller=gains(1.3))
    finally:
        store.database.close()
    assert verify(kept).holds
