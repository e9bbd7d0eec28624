"""A submission as it is shown: whole, or as one line of a list."""

from __future__ import annotations

from datetime import datetime
from typing import cast

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.analysis.results import Verdict
from service.documents.submissions import Kind
from service.judgement.on_change import what_changes
from service.records import (
    approvability,
    basis,
    comparison,
    kept_checkpoints,
    lifecycle,
    loops,
    present_content,
    rechecks,
    states,
    visibility,
)
from service.records.content import (
    Person,
    SignedContent,
    SignedGains,
    read_decision,
    read_installation,
)
from service.records.lifecycle import Action, State
from service.records.roles import Actor
from service.records.tables.changes import SubmissionContent
from service.records.tables.checkpoints import DecisionCheckpoint
from service.records.tables.history import HistoryEvent
from service.records.tables.loops import Loop, LoopRevision
from service.records.tables.submissions import (
    Decision,
    Installation,
    Submission,
    SubmissionState,
)
from service.records.views import (
    Comparison,
    DecisionView,
    Effect,
    EntryReference,
    InstallationView,
    SubmissionSummary,
    SubmissionView,
)


def whole(session: Session, actor: Actor, row: Submission, now: datetime) -> SubmissionView:
    """Return a submission with everything that belongs to it, as `actor` sees it at `now`."""
    present = present_content.present(session, row)
    content = present.read()
    stored = states.stored(session, row.id)
    state = states.read_state(stored, row, now)
    due_at = lifecycle.review_due_at(state, content.kind, row.submitted_at)
    owed = state in lifecycle.REVIEW_OWED
    return SubmissionView(
        id=row.id,
        state=state,
        content=content,
        content_digest=present.digest,
        area=loops.present(session, row.loop_id)[1].area,
        verdict=present.verdict,
        approvals_needed=approvability.approvals_needed(content),
        deviations_needed=approvability.deviations_needed(content),
        hindrances=approvability.hindrances(content),
        changed_basis=basis.changed_since(session, content) if owed else (),
        decisions=_decisions(session, row.id),
        installations=_installations(session, row.id),
        comparisons=comparisons(content, content.gains_in_force.gain_sets if content.gains_in_force else ()),
        effects=_effects(session, content),
        review_due_at=due_at,
        overdue=states.is_overdue(stored, row, due_at, now),
        recheck_due=rechecks.due(session, row, state),
        open_actions=_open_actions(session, actor, row, state, present.digest),
        entry=_entry(session, row.event_number),
    )


def line(
    now: datetime,
    submission: Submission,
    stored: SubmissionState,
    loop: Loop,
    revision: LoopRevision,
    event: HistoryEvent,
    again: SubmissionContent | None,
    recheck_due: bool,
) -> SubmissionSummary:
    """Return one line of a list, from columns alone; `again` is what was recomputed last after a change."""
    present = submission if again is None else again
    state = states.read_state(stored, submission, now)
    due_at = lifecycle.review_due_at(state, cast(Kind, submission.kind), submission.submitted_at)
    return SubmissionSummary(
        id=submission.id,
        loop_id=loop.id,
        site=loop.site,
        tag=loop.tag,
        area=revision.area,
        description=revision.description,
        kind=cast(Kind, submission.kind),
        state=state,
        reason=submission.reason,
        verdict=cast(Verdict | None, present.verdict),
        submitted_by=Person(name=submission.submitted_by_name, full_name=submission.submitted_by_full_name),
        submitted_at=submission.submitted_at,
        review_due_at=due_at,
        overdue=states.is_overdue(stored, submission, due_at, now),
        recheck_due=recheck_due,
        content_digest=present.content_digest,
        entry=EntryReference(number=event.number, digest=event.digest, time=event.time),
    )


def comparisons(content: SignedContent, before: tuple[SignedGains, ...]) -> tuple[Comparison, ...]:
    """Compare each gain set with the one before it: by its condition, or by its place where none is named."""
    if not before:
        return ()
    ranges = loops.ranges(content.loop)
    return tuple(
        comparison.compare(
            before[_place_before(content, index, before)].controller, gain_set.controller, ranges
        )
        for index, gain_set in enumerate(content.gain_sets)
    )


def _place_before(content: SignedContent, index: int, before: tuple[SignedGains, ...]) -> int:
    """Which of the gain sets before a gain set takes the place of."""
    condition = content.gain_sets[index].condition
    same = [place for place, gain_set in enumerate(before) if gain_set.condition == condition]
    return same[-1] if same else min(index, len(before) - 1)


def _effects(session: Session, content: SignedContent) -> tuple[Effect, ...]:
    """What the change does on every model that the gains before were recomputed with too."""
    if content.gains_in_force is None:
        return ()
    row = session.get_one(Submission, content.gains_in_force.submission_id)
    earlier = {
        (each.model_id, each.gain_set): each.answer.recomputation
        for each in present_content.present(session, row).read().recomputations
    }
    before = content.gains_in_force.gain_sets
    found = []
    for each in content.recomputations:
        was = earlier.get((each.model_id, _place_before(content, each.gain_set, before)))
        if was is not None:
            sentences = what_changes(was, each.answer.recomputation)
            found.append(Effect(model_id=each.model_id, gain_set=each.gain_set, sentences=sentences))
    return tuple(found)


def _open_actions(
    session: Session, actor: Actor, row: Submission, state: State, digest: str
) -> tuple[Action, ...]:
    """What may be done next; a first approval of two is an approval to whoever gives it."""
    found = lifecycle.actions_open_to(state, actor, visibility.authors(session, row.id))
    query = select(Decision.id).where(
        Decision.submission_id == row.id,
        Decision.decision == "approve",
        Decision.decided_by == actor.account_id,
        Decision.submission_digest == digest,
    )
    signed: frozenset[Action] = frozenset({"approve"}) if session.execute(query).first() else frozenset()
    hidden = signed | {"approve_first", "install_otherwise"}
    return tuple(action for action in found if action not in hidden)


def _decisions(session: Session, submission_id: str) -> tuple[DecisionView, ...]:
    query = (
        select(Decision, DecisionCheckpoint)
        .outerjoin(DecisionCheckpoint, DecisionCheckpoint.decision_id == Decision.id)
        .where(Decision.submission_id == submission_id)
        .order_by(Decision.ordinal)
    )
    return tuple(
        DecisionView(
            decision=read_decision(row.content),
            entry=_entry(session, row.event_number),
            checkpoint=kept_checkpoints.read(kept),
        )
        for row, kept in session.execute(query)
    )


def _installations(session: Session, submission_id: str) -> tuple[InstallationView, ...]:
    query = (
        select(Installation).where(Installation.submission_id == submission_id).order_by(Installation.ordinal)
    )
    return tuple(
        InstallationView(installation=read_installation(row.content), entry=_entry(session, row.event_number))
        for row in session.execute(query).scalars()
    )


def _entry(session: Session, event_number: int) -> EntryReference:
    return loops.written_by(session, event_number)[1]
