"""Entries of the history by pages, in both directions, and by the tag of a loop alone."""

from __future__ import annotations

import hashlib
import json

import pytest

from service.records import history, history_queries
from service.records.errors import NotFound
from service.records.history_queries import HistoryFilter
from service.records.roles import CONSOLE
from tests.records.store import Store


@pytest.mark.parametrize("latest_first", [False, True])
@pytest.mark.parametrize("limit", [1, 3, 7, 8, 9])
def test_pages_follow_on_each_other_without_gap_and_end(store: Store, latest_first: bool, limit: int) -> None:
    with store.database.reading() as session:
        numbers: list[int] = []
        after: str | None = None
        while True:
            page = history_queries.history(
                session, CONSOLE, HistoryFilter(), after, limit, latest_first=latest_first
            )
            assert 1 <= len(page.items) <= limit
            numbers += [entry.number for entry in page.items]
            if page.after is None:
                break
            after = page.after
        size = history.head(session).size
    expected = list(range(1, size + 1))
    assert numbers == (expected[::-1] if latest_first else expected)


def test_a_tag_alone_finds_it_at_every_site(store: Store) -> None:
    for site, tag in (("North", "FIC-101"), ("South", "fic-101"), ("South", "TIC-3")):
        store.register(site=site, tag=tag)
    with store.database.reading() as session:
        found = history_queries.history(session, CONSOLE, HistoryFilter(tag="FIC-101")).items
        assert [(entry.site, entry.tag) for entry in found] == [("North", "FIC-101"), ("South", "fic-101")]
        of_actor = history_queries.history(session, CONSOLE, HistoryFilter(actor="console")).items
        assert {entry.actor for entry in of_actor} == {"console"}


def test_a_site_or_an_area_alone_finds_all_that_is_of_it(store: Store) -> None:
    for site, tag, area in (("North", "FIC-101", "Drying"), ("South", "TIC-3", "Tank farm")):
        store.register(site=site, tag=tag, area=area)
    with store.database.reading() as session:
        for wanted in (HistoryFilter(site="SOUTH"), HistoryFilter(area="Tank farm")):
            found = history_queries.history(session, CONSOLE, wanted).items
            assert [(entry.site, entry.tag) for entry in found] == [("South", "TIC-3")]
        seen = history_queries.history(session, store.actor("outsider"), HistoryFilter()).items
        assert [(entry.site, entry.tag) for entry in seen] == [("South", "TIC-3")]
        assert history_queries.entry(session, store.actor("outsider"), seen[0].number) == seen[0]


def test_an_entry_is_shown_as_its_bytes_say(store: Store) -> None:
    loop = store.register(area="Drying")
    with store.database.reading() as session:
        number = history.head(session).size
        entry = history_queries.entry(session, store.actor("submitter"), number)
        before = history_queries.entry(session, CONSOLE, number - 1)
        for person, missing in (("outsider", number), ("auditor", number + 1), ("submitter", number - 1)):
            with pytest.raises(NotFound):
                history_queries.entry(session, store.actor(person), missing)
    told = json.loads(entry.canonical)
    assert (entry.loop_id, entry.site, entry.tag, entry.area) == (loop.id, "North", "FIC-101", "Drying")
    for name in ("number", "kind", "actor", "loop_id", "site", "tag", "area", "content", "previous"):
        assert getattr(entry, name) == told[name], name
    assert entry.digest == hashlib.sha256(b"\0" + entry.canonical).hexdigest()
    assert (entry.previous, entry.time) == (before.digest, store.clock())
