"""What is asked of the records: lists, one record, gains in force, the history, what awaits review."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from service.records.lifecycle import State
from service.records.roles import Actor
from service.records.views import (
    Comparison,
    CurvesView,
    EventView,
    GainsInForce,
    LoopView,
    Page,
    SubmissionSummary,
    SubmissionView,
)


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopFilter:
    """Which loops: site and tag without regard to case, `q` anywhere in tag or description."""

    site: str | None = None
    tag: str | None = None
    area: str | None = None
    q: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class SubmissionFilter:
    """Which submissions; `states` empty: in any state. States are as read at the time of asking."""

    states: frozenset[State] = frozenset()
    site: str | None = None
    tag: str | None = None
    loop_id: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class HistoryFilter:
    """Which entries: `since` included, `until` excluded."""

    site: str | None = None
    tag: str | None = None
    area: str | None = None
    since: datetime | None = None
    until: datetime | None = None
    actor: str | None = None
    kind: str | None = None


def loops(
    session: Session, actor: Actor, wanted: LoopFilter, after: str | None = None, limit: int = 50
) -> Page[LoopView]:
    """Loops by site and tag."""
    raise NotImplementedError


def submission(session: Session, actor: Actor, submission_id: str, now: datetime) -> SubmissionView:
    """One submission whole. Raises NotFound."""
    raise NotImplementedError


def submissions(
    session: Session,
    actor: Actor,
    wanted: SubmissionFilter,
    now: datetime,
    after: str | None = None,
    limit: int = 50,
) -> Page[SubmissionSummary]:
    """Submissions, latest first."""
    raise NotImplementedError


def awaiting_review(
    session: Session, actor: Actor, now: datetime, after: str | None = None, limit: int = 50
) -> Page[SubmissionSummary]:
    """Submissions whose review is owed, emergencies first, then the oldest first."""
    raise NotImplementedError


def content_bytes(session: Session, actor: Actor, submission_id: str) -> bytes:
    """The exact canonical bytes that `content_digest` is the SHA-256 of. Raises NotFound."""
    raise NotImplementedError


def curves(session: Session, actor: Actor, submission_id: str) -> tuple[CurvesView, ...]:
    """The stored curves of a submission, in the order of its recomputations. Raises NotFound."""
    raise NotImplementedError


def gains_in_force(session: Session, actor: Actor, loop_id: str, now: datetime) -> GainsInForce | None:
    """The gains that run in a loop's controller as far as is recorded. Raises NotFound."""
    raise NotImplementedError


def compare(session: Session, actor: Actor, submission_id: str, other_id: str) -> tuple[Comparison, ...]:
    """Two submissions of one loop, set by set (the other → this). Raises NotFound, Conflict."""
    raise NotImplementedError


def history(
    session: Session, actor: Actor, wanted: HistoryFilter, after: str | None = None, limit: int = 100
) -> Page[EventView]:
    """Entries of the history, earliest first. Those of no loop (accounts, the store) are for auditors and
    administrators without areas.
    """
    raise NotImplementedError


def entry(session: Session, actor: Actor, number: int) -> EventView:
    """One entry. Raises NotFound."""
    raise NotImplementedError
