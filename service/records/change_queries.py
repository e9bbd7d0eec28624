"""Proposed changes of loops, as they are asked for: one, or a list."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any, cast, get_args

from sqlalchemy import ColumnElement, Select, bindparam, case, or_, select
from sqlalchemy.orm import Session, aliased

from service.records import change_lifecycle, kept_checkpoints, loops, visibility
from service.records.change_lifecycle import ChangeAction, ChangeState
from service.records.content import read_change, read_change_decision
from service.records.errors import NotFound
from service.records.roles import Actor
from service.records.tables.changes import LoopChange, LoopChangeDecision
from service.records.tables.checkpoints import ChangeCheckpoint
from service.records.tables.loops import Loop, LoopModel, LoopRevision
from service.records.views import ChangeDecisionView, ChangeView, Page


@dataclass(frozen=True, kw_only=True, slots=True)
class ChangeFilter:
    """Which changes; the state is the one at the time of asking."""

    state: ChangeState | None = None
    loop_id: str | None = None
    site: str | None = None
    tag: str | None = None


def find(session: Session, actor: Actor, change_id: str) -> ChangeView:
    """Return a change whose loop lies in the actor's areas now. Raises NotFound."""
    found = session.execute(_one_change(), {"change_id": change_id}).one_or_none()
    if found is None or not actor.sees(found[3].area):
        raise NotFound("there is no such change")
    return _view(session, actor, *found)


def changes(
    session: Session, actor: Actor, wanted: ChangeFilter, after: str | None = None, limit: int = 50
) -> Page[ChangeView]:
    """Changes, latest first."""
    query = _changes().where(visibility.in_sight(actor), *_conditions(wanted))
    query = query.order_by(LoopChange.event_number.desc())
    if after is not None:
        query = query.where(LoopChange.event_number < int(after))
    rows = session.execute(query.limit(limit + 1)).all()
    items = tuple(_view(session, actor, *row) for row in rows[:limit])
    return Page(items=items, after=str(items[-1].entry.number) if len(rows) > limit else None)


def content_bytes(session: Session, actor: Actor, change_id: str) -> bytes:
    """Return the exact canonical bytes that a change's digest is the SHA-256 of. Raises NotFound."""
    find(session, actor, change_id)
    return session.get_one(LoopChange, change_id).content


@cache
def _changes() -> Select[LoopChange, LoopChangeDecision, ChangeCheckpoint, LoopRevision, str]:
    """Select changes, each with its decision and checkpoint, the loop's present revision and its state."""
    return (
        select(LoopChange, LoopChangeDecision, ChangeCheckpoint, LoopRevision, _state())
        .join(Loop, Loop.id == LoopChange.loop_id)
        .join(LoopRevision, LoopRevision.loop_id == Loop.id)
        .outerjoin(LoopChangeDecision, LoopChangeDecision.change_id == LoopChange.id)
        .outerjoin(ChangeCheckpoint, ChangeCheckpoint.change_id == LoopChange.id)
        .where(loops.is_present())
    )


@cache
def _one_change() -> Select[LoopChange, LoopChangeDecision, ChangeCheckpoint, LoopRevision, str]:
    return _changes().where(LoopChange.id == bindparam("change_id"))


@cache
def _state() -> ColumnElement[str]:
    """The state of a selected change."""
    retired, later = aliased(LoopModel), aliased(LoopModel)
    replaced = (
        select(later.id)
        .join(retired, retired.loop_id == later.loop_id)
        .where(
            retired.id == LoopChange.retires_model_id,
            later.operating_point_key == retired.operating_point_key,
            later.version > retired.version,
        )
    )
    moved = or_(LoopRevision.revision != LoopChange.loop_revision, replaced.exists())
    decided: list[tuple[Any, Any]] = [
        (LoopChangeDecision.decision == action, change_lifecycle.as_read(action, moved=False))
        for action in get_args(ChangeAction)
    ]
    overtaken = (moved, change_lifecycle.as_read(None, moved=True))
    return case(*decided, overtaken, else_=change_lifecycle.as_read(None, moved=False))


def _conditions(wanted: ChangeFilter) -> Iterator[ColumnElement[bool]]:
    if wanted.state is not None:
        yield _state() == wanted.state
    if wanted.loop_id is not None:
        yield LoopChange.loop_id == wanted.loop_id
    if wanted.site is not None:
        yield Loop.site_key == loops.matching_key(wanted.site)
    if wanted.tag is not None:
        yield Loop.tag_key == loops.matching_key(wanted.tag)


def _view(
    session: Session,
    actor: Actor,
    row: LoopChange,
    decided: LoopChangeDecision | None,
    kept: ChangeCheckpoint | None,
    revision: LoopRevision,
    state: str,
) -> ChangeView:
    reads_as = cast(ChangeState, state)
    decision = None
    if decided is not None:
        decision = ChangeDecisionView(
            decision=read_change_decision(decided.content),
            entry=loops.written_by(session, decided.event_number)[1],
            checkpoint=kept_checkpoints.read(kept),
        )
    return ChangeView(
        id=row.id,
        state=reads_as,
        content=read_change(row.content),
        content_digest=row.content_digest,
        area=revision.area,
        decision=decision,
        open_decisions=change_lifecycle.open_to(reads_as, actor, row.proposed_by),
        entry=loops.written_by(session, row.event_number)[1],
    )
