"""What is asked of the history, as far as the areas and roles of whoever asks reach."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import ColumnElement, Select, select, true
from sqlalchemy.orm import Session

from service.records import loops, visibility
from service.records.errors import NotFound
from service.records.event_kinds import EventKind
from service.records.roles import Actor
from service.records.tables.history import HistoryEvent
from service.records.tables.loops import Loop
from service.records.views import EventView, Page


@dataclass(frozen=True, kw_only=True, slots=True)
class HistoryFilter:
    """Which entries: `since` included, `until` excluded."""

    site: str | None = None
    tag: str | None = None
    area: str | None = None
    since: datetime | None = None
    until: datetime | None = None
    actor: str | None = None
    kind: EventKind | None = None


def history(
    session: Session,
    actor: Actor,
    wanted: HistoryFilter,
    after: str | None = None,
    limit: int = 100,
    *,
    latest_first: bool = False,
) -> Page[EventView]:
    """Entries of the history, earliest first unless `latest_first`.

    Entries about a loop are for whoever sees the loop. Those of no loop (accounts, the store itself) are for
    auditors and administrators without areas.
    """
    query = select(HistoryEvent).where(_in_sight(actor), *_conditions(wanted))
    number = HistoryEvent.number
    query = query.order_by(number.desc() if latest_first else number).limit(limit + 1)
    if after is not None:
        query = query.where(number < int(after) if latest_first else number > int(after))
    rows = session.execute(query).scalars().all()
    items = tuple(map(_view, rows[:limit]))
    return Page(items=items, after=str(items[-1].number) if len(rows) > limit else None)


def entry(session: Session, actor: Actor, number: int) -> EventView:
    """One entry. Raises NotFound."""
    query = select(HistoryEvent).where(HistoryEvent.number == number, _in_sight(actor))
    row = session.execute(query).scalar_one_or_none()
    if row is None:
        raise NotFound("there is no such entry")
    return _view(row)


def _in_sight(actor: Actor) -> ColumnElement[bool]:
    if not actor.sees_every_area:
        mine = loops.present_revisions().where(visibility.in_sight(actor)).with_only_columns(Loop.id)
        return HistoryEvent.loop_id.in_(mine)
    of_a_loop = HistoryEvent.loop_id.is_not(None)
    return of_a_loop if actor.roles.isdisjoint(("auditor", "administrator")) else true()


def _conditions(wanted: HistoryFilter) -> list[ColumnElement[bool]]:
    conditions: list[ColumnElement[bool]] = []
    if wanted.site is not None or wanted.tag is not None:
        conditions.append(HistoryEvent.loop_id.in_(_loop_ids(wanted)))
    if wanted.since is not None:
        conditions.append(HistoryEvent.time >= wanted.since)
    if wanted.until is not None:
        conditions.append(HistoryEvent.time < wanted.until)
    for name in ("area", "actor", "kind"):
        value: str | None = getattr(wanted, name)
        if value is not None:
            conditions.append(getattr(HistoryEvent, name) == value)
    return conditions


def _loop_ids(wanted: HistoryFilter) -> Select[str]:
    query = select(Loop.id)
    if wanted.site is not None:
        query = query.where(Loop.site_key == loops.matching_key(wanted.site))
    if wanted.tag is not None:
        query = query.where(Loop.tag_key == loops.matching_key(wanted.tag))
    return query


def _view(row: HistoryEvent) -> EventView:
    return EventView(
        number=row.number,
        time=row.time,
        kind=row.kind,
        actor=row.actor,
        loop_id=row.loop_id,
        site=row.site,
        tag=row.tag,
        area=row.area,
        content=json.loads(row.canonical)["content"],
        digest=row.digest,
        previous=row.previous,
        canonical=row.canonical,
    )
