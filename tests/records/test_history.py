"""The history: one entry a change, exact bytes, no gaps, no fork, and triggers that refuse."""

from __future__ import annotations

import hashlib
import json
import threading
from collections.abc import Iterator
from typing import Any

import pytest
import rfc8785
from sqlalchemy import select, text
from sqlalchemy.exc import DBAPIError, IntegrityError

from service.records import accounts, history, loops, merkle, queries
from service.records.roles import CONSOLE
from service.records.tables import collection
from service.records.tables.columns import Base, Kept
from service.records.tables.history import HistoryEvent
from service.records.tables.loops import LoopRevision
from service.records.tables.submissions import GainsComingIntoForce
from service.records.views import LoopView
from service.verification.verifier import verify
from tests.databases import Databases, is_sqlite, opened, run, without_guards
from tests.records.store import Store, gains, registration
from tests.records.year import live


def _a_year(store: Store, loop: LoopView) -> None:
    """Something in every kept table."""
    first = store.submit()
    store.approve(first)
    store.install(first)
    second = store.submit(controller=gains(1.2))
    store.decide(second, "reject")
    store.submit(kind="emergency", controller=gains(1.1))


def _canonical(store: Store) -> list[bytes]:
    with store.database.reading() as session:
        found = queries.history(session, store.actor("auditor"), queries.HistoryFilter(), limit=1000)
    return [event.canonical for event in found.items]


def test_entries_are_numbered_without_gaps_and_each_holds_the_digest_of_the_one_before(
    store: Store, loop: LoopView
) -> None:
    _a_year(store, loop)
    previous = "0" * 64
    for number, raw in enumerate(_canonical(store), start=1):
        entry = json.loads(raw)
        assert (entry["number"], entry["previous"]) == (number, previous)
        previous = hashlib.sha256(b"\0" + raw).hexdigest()
    with store.database.reading() as session:
        assert history.head(session).digest == previous


def test_the_bytes_of_an_entry_are_canonical(store: Store, loop: LoopView) -> None:
    _a_year(store, loop)
    assert all(rfc8785.dumps(json.loads(raw)) == raw for raw in _canonical(store))


def test_the_root_of_the_head_is_that_of_the_tree_over_all_entries(store: Store, loop: LoopView) -> None:
    def root(leaves: list[bytes]) -> bytes:
        """RFC 9162, section 2.1.1, as it is written: split at the largest power of two below n."""
        if len(leaves) == 1:
            return hashlib.sha256(b"\0" + leaves[0]).digest()
        split = 1 << ((len(leaves) - 1).bit_length() - 1)
        return hashlib.sha256(b"\1" + root(leaves[:split]) + root(leaves[split:])).digest()

    _a_year(store, loop)
    with store.database.reading() as session:
        assert history.head(session).root == root(_canonical(store)).hex()


def test_the_root_of_no_entries_is_the_digest_of_nothing() -> None:
    assert merkle.root(b"") == hashlib.sha256(b"").digest()


def test_each_change_has_exactly_one_entry(store: Store, loop: LoopView) -> None:
    _a_year(store, loop)
    assert store.events() == [
        "store_made",
        *["account_added"] * 7,
        "loop_registered",
        "model_added",
        "gains_submitted",
        "gains_approved",
        "gains_installed",
        "gains_submitted",
        "gains_rejected",
        "gains_submitted",
    ]


def test_an_entry_tells_every_row_that_was_inserted_with_it(store: Store) -> None:
    live(store)
    told: dict[str, int] = {}
    for raw in _canonical(store):
        for table, rows in json.loads(raw)["rows"].items():
            told[table] = told.get(table, 0) + len(rows)
    kept = {mapper.class_.__tablename__ for mapper in Base.registry.mappers if _is_kept(mapper)}
    counts = store.counts()
    assert told == {table: counts[table] for table in kept if counts[table]}
    assert set(told) == kept


def test_bytes_of_a_row_stand_in_its_entry_by_their_sha256(store: Store, loop: LoopView) -> None:
    with store.database.reading() as session:
        found = select(HistoryEvent.canonical, LoopRevision.content).join(
            LoopRevision, LoopRevision.event_number == HistoryEvent.number
        )
        canonical, content = session.execute(found).one()
    (row,) = json.loads(canonical)["rows"]["loop_revisions"]
    assert row["content"] == hashlib.sha256(content).hexdigest()


def test_the_verification_finds_every_row_as_it_was_recorded(store: Store, loop: LoopView) -> None:
    _a_year(store, loop)
    report = verify(store.url)
    assert (report.fault, report.entries) == (None, len(store.events()))


def test_leaves_are_the_digests_of_the_first_entries(store: Store) -> None:
    with store.database.reading() as session:
        found = history.leaves(session, 3)
    assert found == [hashlib.sha256(b"\0" + raw).digest() for raw in _canonical(store)[:3]]


def _is_kept(mapper: Any) -> bool:
    return issubclass(mapper.class_, Kept)


def test_what_is_rolled_back_leaves_no_gap(store: Store, loop: LoopView) -> None:
    with store.database.writing() as session:
        loops.register(session, store.actor("submitter"), registration(tag="X-1"), store.clock())
        session.rollback()
    store.register(tag="X-2")
    numbers = [json.loads(raw)["number"] for raw in _canonical(store)]
    assert numbers == list(range(1, len(numbers) + 1))


def test_reading_writes_nothing(store: Store) -> None:
    with store.database.reading() as session, pytest.raises(DBAPIError, match=r"read-?only"):
        session.execute(text("UPDATE history_head SET size = size + 1"))


KEPT = sorted(
    {mapper.class_.__tablename__ for mapper in Base.registry.mappers if _is_kept(mapper)}
    | {HistoryEvent.__tablename__}
)


def _replacing(url: str, table: str) -> str:
    """The statement by which this kind of database puts a row in another's place."""
    if is_sqlite(url):
        return f"INSERT OR REPLACE INTO {table} SELECT * FROM {table}"  # noqa: S608  names of our own tables
    key = collection.metadata().tables[table].primary_key
    name = next(iter(key.columns)).name
    return (
        f"INSERT INTO {table} SELECT * FROM {table}"  # noqa: S608
        f" ON CONFLICT ON CONSTRAINT {key.name} DO UPDATE SET {name} = excluded.{name}"
    )


@pytest.fixture
def lived_in(full: str, databases: Databases) -> Iterator[str]:
    url = databases.copy_of(full)
    yield url
    databases.drop(url)


@pytest.fixture(scope="module")
def full(made: str, databases: Databases) -> str:
    """A store with something in every kept table."""
    store = Store(databases.copy_of(made))
    live(store)
    store.database.close()
    return store.url


@pytest.mark.parametrize("table", KEPT)
def test_the_database_refuses_to_change_delete_or_replace_what_is_kept(lived_in: str, table: str) -> None:
    column = "canonical" if table == "history_events" else "event_number"
    statements = [
        f"UPDATE {table} SET {column} = {column}",  # noqa: S608
        f"DELETE FROM {table}",  # noqa: S608
        _replacing(lived_in, table),
    ]
    if not is_sqlite(lived_in):
        statements.append(f"TRUNCATE {table} CASCADE")
        statements.append(f"SET session_replication_role = replica; DELETE FROM {table}")  # noqa: S608
    for statement in statements:
        with opened(lived_in) as connection, pytest.raises(DBAPIError, match="append-only"):
            run(connection, statement)


@pytest.mark.parametrize(
    "statement",
    [
        "UPDATE history_head SET size = size - 1",
        "UPDATE history_head SET size = size + 1, id = 2",
        "UPDATE history_head SET digest = '0'",
        "DELETE FROM history_head",
    ],
)
def test_the_head_only_moves_by_one(store: Store, statement: str) -> None:
    with opened(store.url) as connection, pytest.raises(DBAPIError, match=r"the head|append-only"):
        run(connection, statement)


def test_the_head_is_not_replaced(store: Store) -> None:
    statement = _replacing(store.url, "history_head")
    with opened(store.url) as connection, pytest.raises(DBAPIError, match="the head"):
        run(connection, statement)
    if not is_sqlite(store.url):
        with opened(store.url) as connection, pytest.raises(DBAPIError, match="append-only"):
            run(connection, "TRUNCATE history_head")


def test_every_kept_table_has_its_guards(store: Store) -> None:
    with opened(store.url) as connection:
        if is_sqlite(store.url):
            found, what = run(connection, SQLITE_TRIGGERS), ("update", "delete", "replace")
        else:
            found, what = run(connection, POSTGRESQL_TRIGGERS), ("change", "truncate")
    assert {f"{table}_refuses_{name}" for table in KEPT for name in what} <= {name for (name,) in found}


SQLITE_TRIGGERS = "SELECT name FROM sqlite_master WHERE type = 'trigger'"
POSTGRESQL_TRIGGERS = "SELECT tgname FROM pg_trigger WHERE tgenabled = 'A'"
"""Those that a session in the replica role does not skip."""


def test_two_writers_at_once_make_no_fork_and_no_gap(store: Store) -> None:
    changes, writers = 25, 4
    failures: list[BaseException] = []

    def write(writer: int) -> None:
        try:
            for index in range(changes):
                with store.database.writing() as session:
                    accounts.rename(
                        session, CONSOLE, "reviewer", f"Name {writer} {index}", "race", store.clock()
                    )
        except BaseException as failure:
            failures.append(failure)

    before = len(_canonical(store))
    threads = [threading.Thread(target=write, args=(writer,)) for writer in range(writers)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert failures == []
    entries = [json.loads(raw) for raw in _canonical(store)]
    assert len(entries) == before + changes * writers
    assert [entry["number"] for entry in entries] == list(range(1, len(entries) + 1))
    assert len({entry["previous"] for entry in entries}) == len(entries)


def test_two_decisions_at_once_and_one_wins(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    outcomes: list[str] = []
    barrier = threading.Barrier(2)

    def decide(person: str) -> None:
        barrier.wait()
        try:
            store.decide(submission, "reject", person)
            outcomes.append("signed")
        except Exception as refusal:
            outcomes.append(type(refusal).__name__)

    threads = [threading.Thread(target=decide, args=(person,)) for person in ("reviewer", "second")]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert sorted(outcomes) == ["WrongStep", "signed"]
    assert len(store.read(submission).decisions) == 1


def test_the_same_entry_cannot_follow_twice(store: Store) -> None:
    with store.database.writing() as session:
        last = session.get_one(HistoryEvent, history.head(session).size)
        twin = HistoryEvent(
            number=last.number + 1,
            time=last.time,
            kind=last.kind,
            actor=last.actor,
            canonical=last.canonical,
            previous=last.previous,
            digest="0" * 64,
        )
        session.add(twin)
        with pytest.raises(IntegrityError):
            session.flush()
        session.rollback()


def test_a_history_begins_once(store: Store) -> None:
    before = store.events()
    with store.database.writing() as session:
        history.begin(session, demonstration=False, now=store.clock())
    assert store.events() == before


def test_a_value_that_can_be_written_in_more_than_one_way_is_not_kept(store: Store) -> None:
    """A float in a column would be vouched for by digits that another program writes differently."""
    row = GainsComingIntoForce(loop_id="0" * 32, ordinal=1.5, submission_id="0" * 32, since=store.clock())
    before = store.events()
    with store.database.writing() as session:
        with pytest.raises(TypeError, match="a float has no place"):
            history.append(
                session, kind="gains_installed", actor=CONSOLE, content={}, now=store.clock(), rows=[row]
            )
        session.rollback()
    assert store.events() == before


def test_an_append_returns_the_number_the_digest_and_the_time_of_its_entry(store: Store) -> None:
    with store.database.writing() as session:
        told = history.append(session, kind="inspected", actor=CONSOLE, content={}, now=store.clock())
        head = history.head(session)
    assert (told.number, told.digest, told.time) == (head.size, head.digest, store.clock())


def test_an_entry_about_a_loop_says_which_in_columns_to_search_by(store: Store, loop: LoopView) -> None:
    with store.database.reading() as session:
        about = select(HistoryEvent.loop_id, HistoryEvent.site, HistoryEvent.tag, HistoryEvent.area)
        found = session.execute(about.where(HistoryEvent.kind == "loop_registered")).one()
    assert tuple(found) == (loop.id, "North", "FIC-101", "Drying")


def test_of_several_entries_of_a_kind_the_last_one_counts(store: Store) -> None:
    with store.database.writing() as session:
        for count in (1, 2, 3):
            content = {"count": count}
            history.append(session, kind="inspected", actor=CONSOLE, content=content, now=store.clock())
        assert history.last_content(session, "inspected", "repaired") == {"count": 3}
        assert history.last_content(session, "repaired") is None


@pytest.mark.parametrize(
    "change",
    [
        "UPDATE history_events SET kind = 'account_added' WHERE number = 1",
        "DELETE FROM history_events WHERE number = 1",
    ],
)
def test_a_store_whose_beginning_is_gone_is_no_demonstrations(store: Store, change: str) -> None:
    """A demonstration's store takes any clock: nothing but its own first entry may say that it is one."""
    with store.database.reading() as session:
        assert history.is_demonstration(session)
    without_guards(store.url, change)
    with store.database.reading() as session:
        assert not history.is_demonstration(session)


def test_without_a_first_entry_a_history_has_no_origin(store: Store) -> None:
    with store.database.reading() as session:
        assert history.origin(session) == session.get_one(HistoryEvent, 1).digest
    without_guards(store.url, "DELETE FROM history_events WHERE number = 1")
    with store.database.reading() as session:
        assert history.origin(session) == ""
