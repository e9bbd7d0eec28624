"""What is asked of the records: lists, one record, gains in force, the history, what awaits review."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from functools import cache

from sqlalchemy import ColumnElement, Select, and_, bindparam, case, func, not_, or_, select, tuple_
from sqlalchemy.orm import Session, aliased, defer

from service.analysis.results import Curves
from service.documents.reading import read_kept
from service.records import (
    left_otherwise,
    lifecycle,
    present_content,
    rechecks,
    states,
    submission_views,
    visibility,
)
from service.records import loops as loop_records
from service.records.errors import Conflict
from service.records.history_queries import HistoryFilter as HistoryFilter
from service.records.history_queries import entry as entry
from service.records.history_queries import history as history
from service.records.lifecycle import State
from service.records.roles import Actor
from service.records.tables.changes import SubmissionContent
from service.records.tables.columns import UtcTime
from service.records.tables.history import HistoryEvent
from service.records.tables.loops import Loop, LoopRevision
from service.records.tables.submissions import Submission, SubmissionRecomputation, SubmissionState
from service.records.views import (
    Compared,
    CurvesView,
    GainSetComparison,
    GainsInForce,
    LoopView,
    Page,
    SubmissionComparison,
    SubmissionSummary,
    SubmissionView,
)

SEPARATOR = "\n"
"""Between the parts of a list's key; stands in no site or tag."""

PAST_TIME_SHOWN = timedelta(days=30)
"""How long gains past their time that do not run are told unasked. Common practice.

Temporary gains that still run stay until others take their place. What does not run waits for nobody: it is
told until gains are submitted for the loop again, and no longer than this.
"""

_Lines = Select[Submission, SubmissionState, Loop, LoopRevision, HistoryEvent, SubmissionContent, bool]

_LATER = aliased(SubmissionState)
_NEWER = aliased(SubmissionContent)
_NEXT = aliased(Submission)


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
    recheck_due: bool | None = None
    left_otherwise: bool | None = None
    """Whether other gains than approved were left in the controller, and not put right since."""
    past_time_and_open: bool = False
    """Only those past their time that somebody still has to look after, see `PAST_TIME_SHOWN`."""


def loops(
    session: Session, actor: Actor, wanted: LoopFilter, after: str | None = None, limit: int = 50
) -> Page[LoopView]:
    """Loops by site and tag."""
    query = (
        loop_records.present_revisions()
        .add_columns(LoopRevision)
        .where(visibility.in_sight(actor), *_loop_conditions(wanted))
        .order_by(Loop.site_key, Loop.tag_key)
        .limit(limit + 1)
    )
    if after is not None:
        site_key, _, tag_key = after.partition(SEPARATOR)
        query = query.where(tuple_(Loop.site_key, Loop.tag_key) > tuple_(site_key, tag_key))
    rows = session.execute(query).all()
    last = rows[limit - 1][0] if len(rows) > limit else None
    return Page(
        items=tuple(loop_records.view(session, loop, revision) for loop, revision in rows[:limit]),
        after=None if last is None else f"{last.site_key}{SEPARATOR}{last.tag_key}",
    )


def submission(session: Session, actor: Actor, submission_id: str, now: datetime) -> SubmissionView:
    """One submission whole. Raises NotFound."""
    row = visibility.submission(session, actor, submission_id)
    return submission_views.whole(session, actor, row, now)


def submissions(
    session: Session,
    actor: Actor,
    wanted: SubmissionFilter,
    now: datetime,
    after: str | None = None,
    limit: int = 50,
) -> Page[SubmissionSummary]:
    """Submissions, latest first."""
    query = _lines().where(visibility.in_sight(actor), *_submission_conditions(wanted, now))
    query = query.order_by(Submission.event_number.desc()).limit(limit + 1)
    if after is not None:
        query = query.where(Submission.event_number < int(after))
    rows = session.execute(query, {"now": now}).all()
    items = tuple(submission_views.line(now, *row) for row in rows[:limit])
    return Page(items=items, after=str(items[-1].entry.number) if len(rows) > limit else None)


def awaiting_review(
    session: Session, actor: Actor, now: datetime, after: str | None = None, limit: int = 50
) -> Page[SubmissionSummary]:
    """Submissions whose review is owed: those that run already first, then the oldest first."""
    wanted = SubmissionFilter(states=lifecycle.REVIEW_OWED)
    rank = case((Submission.kind.in_(sorted(lifecycle.IN_FORCE_FROM_THE_START)), 0), else_=1)
    query = _lines().where(visibility.in_sight(actor), *_submission_conditions(wanted, now))
    query = query.order_by(rank, Submission.event_number).limit(limit + 1)
    if after is not None:
        first, _, number = after.partition(SEPARATOR)
        query = query.where(tuple_(rank, Submission.event_number) > tuple_(int(first), int(number)))
    rows = session.execute(query, {"now": now}).all()
    items = tuple(submission_views.line(now, *row) for row in rows[:limit])
    more = len(rows) > limit
    return Page(items=items, after=_review_key(items[-1]) if more else None)


def content_bytes(session: Session, actor: Actor, submission_id: str) -> bytes:
    """The exact canonical bytes that `content_digest` is the SHA-256 of. Raises NotFound."""
    row = visibility.submission(session, actor, submission_id)
    return present_content.present(session, row).kept


def curves(session: Session, actor: Actor, submission_id: str) -> tuple[CurvesView, ...]:
    """The stored curves of a submission, in the order of its recomputations. Raises NotFound."""
    row = visibility.submission(session, actor, submission_id)
    first = present_content.present(session, row).first_recomputation
    query = (
        select(SubmissionRecomputation)
        .where(
            SubmissionRecomputation.submission_id == submission_id, SubmissionRecomputation.ordinal >= first
        )
        .order_by(SubmissionRecomputation.ordinal)
    )
    return tuple(
        CurvesView(
            model_id=row.model_id,
            operating_point=row.operating_point,
            gain_set=row.gain_set,
            curves=read_kept(Curves, row.curves),
        )
        for row in session.execute(query).scalars()
        if row.curves is not None
    )


def gains_in_force(session: Session, actor: Actor, loop_id: str, now: datetime) -> GainsInForce | None:
    """The gains that run in a loop's controller as far as is recorded. Raises NotFound."""
    loop_records.find(session, actor, loop_id)
    running = states.running(session, loop_id)
    if running is None:
        return None
    row = session.get_one(Submission, running.submission_id)
    present = present_content.present(session, row)
    content, state = present.read(), states.as_read(session, row, now)
    return GainsInForce(
        submission_id=row.id,
        content_digest=present.digest,
        kind=content.kind,
        state=state,
        since=running.since,
        gain_sets=content.gain_sets,
        recheck_due=rechecks.due(session, row, state),
        entry=loop_records.written_by(session, running.event_number)[1],
    )


def compare(
    session: Session, actor: Actor, submission_id: str, before_id: str | None = None
) -> SubmissionComparison:
    """Hold a submission against another of the same loop, None: against the gains in force now.

    Raises NotFound, Conflict.
    """
    this = visibility.submission(session, actor, submission_id)
    after = present_content.present(session, this)
    compared = Compared(submission_id=submission_id, content_digest=after.digest)
    if before_id is None:
        running = states.running(session, this.loop_id)
        if running is None:
            return SubmissionComparison(before=None, after=compared, gain_sets=())
        before_id = running.submission_id
    other = visibility.submission(session, actor, before_id)
    if this.loop_id != other.loop_id:
        raise Conflict("these are gains of two loops")
    before, content = present_content.present(session, other), after.read()
    comparisons = submission_views.comparisons(content, before.read().gain_sets)
    return SubmissionComparison(
        before=Compared(submission_id=other.id, content_digest=before.digest),
        after=compared,
        gain_sets=tuple(
            GainSetComparison(condition=gain_set.condition, comparison=comparison)
            for gain_set, comparison in zip(content.gain_sets, comparisons, strict=True)
        ),
    )


def _loop_conditions(wanted: LoopFilter) -> list[ColumnElement[bool]]:
    conditions: list[ColumnElement[bool]] = []
    if wanted.site is not None:
        conditions.append(Loop.site_key == loop_records.matching_key(wanted.site))
    if wanted.tag is not None:
        conditions.append(Loop.tag_key == loop_records.matching_key(wanted.tag))
    if wanted.area is not None:
        conditions.append(LoopRevision.area == wanted.area)
    if wanted.q is not None:
        in_tag = Loop.tag_key.contains(loop_records.matching_key(wanted.q), autoescape=True)
        in_description = func.lower(LoopRevision.description).contains(wanted.q.lower(), autoescape=True)
        conditions.append(or_(in_tag, in_description))
    return conditions


@cache
def _lines() -> _Lines:
    """Select submissions as they read at the parameter `now`, with all that a line of a list is made of."""
    not_last = select(_LATER.submission_id).where(
        _LATER.submission_id == SubmissionState.submission_id, _LATER.ordinal > SubmissionState.ordinal
    )
    replaced = select(_NEWER.version).where(
        _NEWER.submission_id == SubmissionContent.submission_id, _NEWER.version > SubmissionContent.version
    )
    loop = loop_records.present_revisions().with_only_columns(Loop.id, LoopRevision.revision).subquery()
    return (
        select(
            Submission,
            SubmissionState,
            Loop,
            LoopRevision,
            HistoryEvent,
            SubmissionContent,
            rechecks.is_due(_reads_as()),
        )
        .join(SubmissionState, SubmissionState.submission_id == Submission.id)
        .join(Loop, Loop.id == Submission.loop_id)
        .join(loop, loop.c.id == Submission.loop_id)
        .join(
            LoopRevision,
            and_(LoopRevision.loop_id == Loop.id, LoopRevision.revision == loop.c.revision),
        )
        .join(HistoryEvent, HistoryEvent.number == Submission.event_number)
        .outerjoin(
            SubmissionContent,
            and_(SubmissionContent.submission_id == Submission.id, ~replaced.exists()),
        )
        .where(~not_last.exists())
        # a line shows none of it, and a page of lists has fifty
        .options(*map(defer, (Submission.content, SubmissionContent.content, HistoryEvent.canonical)))
    )


def _submission_conditions(wanted: SubmissionFilter, now: datetime) -> list[ColumnElement[bool]]:
    conditions: list[ColumnElement[bool]] = []
    if wanted.states:
        conditions.append(_reads_as().in_(sorted(wanted.states)))
    if wanted.site is not None:
        conditions.append(Loop.site_key == loop_records.matching_key(wanted.site))
    if wanted.tag is not None:
        conditions.append(Loop.tag_key == loop_records.matching_key(wanted.tag))
    if wanted.recheck_due is not None:
        due = rechecks.is_due(_reads_as())
        conditions.append(due if wanted.recheck_due else not_(due))
    if wanted.left_otherwise is not None:
        otherwise = left_otherwise.is_left_otherwise()
        conditions.append(otherwise if wanted.left_otherwise else not_(otherwise))
    if wanted.past_time_and_open:
        conditions.append(_is_past_time_and_open(now))
    if wanted.loop_id is not None:
        conditions.append(Loop.id == wanted.loop_id)
    return conditions


def _is_past_time_and_open(now: datetime) -> ColumnElement[bool]:
    later = select(_NEXT.id).where(
        _NEXT.loop_id == Submission.loop_id, _NEXT.event_number > Submission.event_number
    )
    since = now - PAST_TIME_SHOWN
    lately = or_(Submission.install_by >= since, Submission.temporary_until >= since)
    past = _reads_as().in_(sorted(lifecycle.PAST_THEIR_TIME))
    return and_(past, or_(states.runs(), and_(lately, ~later.exists())))


@cache
def _reads_as() -> ColumnElement[str]:
    """The state as it reads at the parameter `now`, by the clock rules of the life cycle."""
    now = bindparam("now", type_=UtcTime)
    rules = [
        (and_(SubmissionState.state == rule.stored, getattr(Submission, rule.limit) < now), rule.reads)
        for rule in lifecycle.CLOCK
    ]
    return case(*rules, else_=SubmissionState.state)


def _review_key(item: SubmissionSummary) -> str:
    rank = 0 if item.kind in lifecycle.IN_FORCE_FROM_THE_START else 1
    return f"{rank}{SEPARATOR}{item.entry.number}"
