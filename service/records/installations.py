"""Gains as they were found and left at the controller, held against those that were approved."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from hashlib import sha256
from uuid import uuid4

from sqlalchemy import select
from sqlalchemy.orm import Session

from service.analysis.controller import Controller
from service.documents.canonical import canonical_bytes
from service.documents.errors import FieldProblem
from service.documents.installations import InstallationRequest
from service.documents.writing import plain
from service.records import comparison, history, lifecycle, loops, present_content, states, visibility
from service.records.content import (
    Difference,
    InstallationContent,
    Person,
    SignedContent,
    read_installation,
)
from service.records.errors import FieldErrors
from service.records.roles import Actor, require_role
from service.records.states import Outcome
from service.records.tables.columns import Base
from service.records.tables.submissions import Decision, Installation, Submission
from service.records.views import InstallationView

CLOCKS_APART = timedelta(minutes=5)
"""How far the clock of whoever reports may be from ours. Common practice."""


@dataclass(frozen=True, slots=True)
class _Held:
    """As left held against the nearest approved set."""

    gain_set: int
    differences: tuple[Difference, ...]

    @property
    def as_approved(self) -> bool:
        return not any(difference.hinders for difference in self.differences)


def check_may_install(session: Session, actor: Actor, submission_id: str) -> None:
    """Raise NotFound or NotAllowed before the document is read."""
    visibility.submission(session, actor, submission_id)
    require_role(actor, "submitter")


def install(
    session: Session, actor: Actor, submission_id: str, request: InstallationRequest, now: datetime
) -> InstallationView:
    """Record an installation.

    As left equal to the approved gains, in any form, to 1e-9: they are in force.

    Else it is recorded with its differences and the state stays. Gain sets are typed in one by one: they
    are in force when the last of them is. Raises NotFound, NotAllowed, FieldErrors (installed in the
    future, or before the submission was made), WrongStep.
    """
    submission = visibility.submission(session, actor, submission_id)
    lifecycle.check_who("install", actor, visibility.authors(session, submission_id))
    content = present_content.present(session, submission).read()
    _check_time(request, content, now)
    held = _nearest(content, request.as_left)
    earlier = _installations(session, submission_id)
    whole = held.as_approved and _all_sets_left(content, earlier, held.gain_set)
    # by the clock at the controller: what was installed in time is often recorded on the next working day
    at = min(request.installed_at, now)
    state = states.next_row(session, submission, "install" if whole else "install_otherwise", at)
    outcome = Outcome((), None)
    if whole:
        since = request.installed_at
        outcome = states.coming_into_force(session, submission.loop_id, submission.id, since, now)
    kept = _content(session, actor, submission, content, request, held, now)
    return _keep(session, actor, submission, kept, len(earlier), (state, *outcome.rows), outcome)


def _check_time(request: InstallationRequest, content: SignedContent, now: datetime) -> None:
    if request.installed_at > now + CLOCKS_APART:
        raise FieldErrors((FieldProblem("/installed_at", "this time is yet to come"),))
    runs_already = content.kind in lifecycle.IN_FORCE_FROM_THE_START
    if request.installed_at < content.submitted_at - CLOCKS_APART and not runs_already:
        raise FieldErrors((FieldProblem("/installed_at", "these gains were not yet submitted then"),))


def _nearest(content: SignedContent, as_left: Controller) -> _Held:
    loop_ranges = loops.ranges(content.loop)
    held = (
        _Held(index, comparison.differences(gain_set.controller, as_left, loop_ranges))
        for index, gain_set in enumerate(content.gain_sets)
    )
    return min(held, key=lambda entry: sum(difference.hinders for difference in entry.differences))


def _all_sets_left(content: SignedContent, earlier: tuple[Installation, ...], gain_set: int) -> bool:
    left = {read_installation(row.content).gain_set for row in earlier if row.as_approved} | {gain_set}
    return len(left) == len(content.gain_sets)


def _installations(session: Session, submission_id: str) -> tuple[Installation, ...]:
    query = (
        select(Installation).where(Installation.submission_id == submission_id).order_by(Installation.ordinal)
    )
    return tuple(session.execute(query).scalars())


def _content(
    session: Session,
    actor: Actor,
    submission: Submission,
    content: SignedContent,
    request: InstallationRequest,
    held: _Held,
    now: datetime,
) -> InstallationContent:
    return InstallationContent(
        installation_id=uuid4().hex,
        submission_id=submission.id,
        gain_set=held.gain_set,
        recorded_by=Person(name=actor.name, full_name=actor.full_name),
        recorded_at=now,
        installation=request,
        as_approved=held.as_approved,
        before_approval=_before_approval(session, submission, request),
        differences=held.differences,
        as_found_differences=_as_found(session, submission, content, request),
    )


def _before_approval(session: Session, submission: Submission, request: InstallationRequest) -> bool:
    query = (
        select(Decision.decided_at)
        .where(Decision.submission_id == submission.id, Decision.decision == "approve")
        .order_by(Decision.ordinal.desc())
    )
    approved_at = session.execute(query.limit(1)).scalar_one_or_none()
    return approved_at is None or request.installed_at < approved_at - CLOCKS_APART


def _as_found(
    session: Session, submission: Submission, content: SignedContent, request: InstallationRequest
) -> tuple[Difference, ...] | None:
    """Hold as found against what ran before these gains, as far as is recorded."""
    running = states.running(session, submission.loop_id)
    if running is None:
        return None
    own = running.submission_id == submission.id
    before = content.gains_in_force if own else _read(session, running.submission_id)
    if before is None:
        return None
    loop_ranges = loops.ranges(content.loop)
    found = (
        comparison.differences(gain_set.controller, request.as_found, loop_ranges)
        for gain_set in before.gain_sets
    )
    return min(found, key=lambda differences: sum(difference.hinders for difference in differences))


def _read(session: Session, submission_id: str) -> SignedContent:
    return present_content.present(session, session.get_one(Submission, submission_id)).read()


def _keep(
    session: Session,
    actor: Actor,
    submission: Submission,
    content: InstallationContent,
    ordinal: int,
    rows: tuple[Base, ...],
    outcome: Outcome,
) -> InstallationView:
    kept = canonical_bytes(plain(content))
    row = Installation(
        id=content.installation_id,
        submission_id=submission.id,
        ordinal=ordinal,
        recorded_by=actor.account_id,
        recorded_at=content.recorded_at,
        as_approved=content.as_approved,
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    entry = history.append(
        session,
        kind="gains_installed" if content.as_approved else "gains_installed_otherwise",
        actor=actor,
        about=loops.about(*loops.present(session, submission.loop_id)),
        content={"installation": content, "supersedes": outcome.superseded},
        now=content.recorded_at,
        rows=(row, *rows),
    )
    return InstallationView(installation=content, entry=entry)
