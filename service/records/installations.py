"""Gains as they were found and left at the controller, held against those that were approved."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from datetime import datetime, timedelta
from hashlib import sha256
from itertools import chain
from uuid import uuid4

from sqlalchemy import bindparam, select
from sqlalchemy.orm import Session

from service.analysis.controller import Controller
from service.documents.canonical import canonical_bytes
from service.documents.errors import FieldProblem
from service.documents.installations import InstallationRequest
from service.documents.writing import plain
from service.records import (
    as_left,
    comparison,
    history,
    lifecycle,
    loops,
    present_content,
    signing,
    states,
    visibility,
)
from service.records.basis import Basis, models_in_force, present_basis, read_basis
from service.records.content import (
    Difference,
    InstallationContent,
    RecomputedAsLeft,
    SetLeft,
    SetLeftOtherwise,
    SignedContent,
    SignedGains,
    read_installation,
)
from service.records.errors import BasisChanged, FieldErrors
from service.records.roles import Actor, require_role
from service.records.states import Outcome
from service.records.tables.submissions import Decision, Installation, Submission, SubmissionState
from service.records.views import InstallationView

CLOCKS_APART = timedelta(minutes=5)
"""How far the clock of whoever reports may be from ours. Common practice."""

_OF_SUBMISSION = (
    select(Installation)
    .where(Installation.submission_id == bindparam("submission_id"))
    .order_by(Installation.ordinal)
)


@dataclass(frozen=True, slots=True)
class _Held:
    """One set as left, held against the approved set at index `gain_set`; as found beside it."""

    gain_set: int
    as_found: Controller
    as_left: Controller
    differences: tuple[Difference, ...]

    @property
    def left(self) -> SetLeft:
        hindered = any(difference.hinders for difference in self.differences)
        return SetLeft(gain_set=self.gain_set, as_approved=not hindered)


@dataclass(frozen=True, slots=True)
class _LookedAt:
    """An installation held against what is on record: what it comes to as things stand."""

    submission: Submission
    content: SignedContent
    earlier: int
    """How many installations there are already."""
    held: tuple[_Held, ...]
    whole: bool
    """Every set was left as approved when it was looked at last."""
    state: SubmissionState
    otherwise: tuple[SetLeftOtherwise, ...]
    """The sets that run otherwise than approved, where this installation left any so."""


@dataclass(frozen=True, kw_only=True, slots=True)
class PreparedInstallation:
    """An installation with what was recomputed of gains left otherwise. Its inside is the records' own."""

    submission_id: str
    request: InstallationRequest
    as_left: RecomputedAsLeft | None
    basis: Basis

    def still_holds(self, otherwise: tuple[SetLeftOtherwise, ...], present: Basis) -> bool:
        """Say whether what was recomputed is still what runs, on what is still on record."""
        sets = self.as_left.gain_sets if self.as_left else ()
        return sets == otherwise and self.basis == present


def check_may_install(session: Session, actor: Actor, submission_id: str) -> None:
    """Raise NotFound or NotAllowed before the document is read."""
    visibility.submission(session, actor, submission_id)
    require_role(actor, "submitter")


def prepare(
    session: Session, actor: Actor, submission_id: str, request: InstallationRequest, now: datetime
) -> PreparedInstallation:
    """Recompute the loop where gains were left otherwise than approved. Reads only.

    It is apart from `install` as a submission's recomputation is, so that it holds up no other writer. Raises
    as `install` does.
    """
    looked_at = _look(session, actor, submission_id, request, now)
    loop = loops.find(session, actor, looked_at.submission.loop_id)
    models = models_in_force(session, loop.id)
    return PreparedInstallation(
        submission_id=submission_id,
        request=request,
        as_left=as_left.recomputed(loop, models, looked_at.otherwise) if looked_at.otherwise else None,
        basis=read_basis(loop, models, None),
    )


def install(
    session: Session, actor: Actor, prepared: PreparedInstallation, now: datetime
) -> InstallationView:
    """Record a prepared installation.

    As left equal to the approved gains, in any form, to 1e-9: they are in force.

    Else it is recorded with its differences and what was recomputed, and the state stays. Gain sets may be
    typed in one by one: they are in force when each of them is left as approved. Raises NotFound, NotAllowed,
    FieldErrors (installed in the future, or before the submission was made; a set that is none of those
    approved), WrongStep, BasisChanged (what was recomputed is not what holds now: prepare again).
    """
    request = prepared.request
    looked_at = _look(session, actor, prepared.submission_id, request, now)
    submission = looked_at.submission
    if looked_at.otherwise:
        _check_basis(session, prepared, looked_at)
    outcome = Outcome((), None)
    if looked_at.whole:
        since = request.installed_at
        outcome = states.coming_into_force(session, submission.loop_id, submission.id, since, now)
    recomputed = prepared.as_left if looked_at.otherwise else None
    kept = _content(session, actor, looked_at, request, recomputed, now)
    return _keep(session, actor, looked_at, kept, outcome)


def _look(
    session: Session, actor: Actor, submission_id: str, request: InstallationRequest, now: datetime
) -> _LookedAt:
    submission = visibility.submission(session, actor, submission_id)
    lifecycle.check_who("install", actor, visibility.authors(session, submission_id))
    content = present_content.present(session, submission).read()
    _check_time(request, content, now)
    held = _held(content, request)
    earlier = _earlier(session, submission_id)
    as_approved = all(each.left.as_approved for each in held)
    whole = as_approved and _all_sets_left(content, earlier, held)
    # by the clock at the controller: what was installed in time is often recorded on the next working day
    at = min(request.installed_at, now)
    return _LookedAt(
        submission=submission,
        content=content,
        earlier=len(earlier),
        held=held,
        whole=whole,
        state=states.next_row(session, submission, "install" if whole else "install_otherwise", at),
        otherwise=() if as_approved else _otherwise(session, submission, content, earlier, held),
    )


def _otherwise(
    session: Session,
    submission: Submission,
    content: SignedContent,
    earlier: dict[int, InstallationContent],
    held: tuple[_Held, ...],
) -> tuple[SetLeftOtherwise, ...]:
    """What runs otherwise: these sets, and those of earlier looks that no gains have taken the place of."""
    running = states.running(session, submission.loop_id)
    since = running.event_number if running else 0
    before = (each for number, done in earlier.items() if number > since for each in done.sets_as_left())
    now = ((each.left, each.as_left) for each in held)
    return as_left.sets_otherwise(content, chain(before, now))


def _check_basis(session: Session, prepared: PreparedInstallation, looked_at: _LookedAt) -> None:
    # gains that came into force meanwhile are no part of what was recomputed
    present = replace(present_basis(session, looked_at.submission.loop_id), gains_in_force=None)
    if not prepared.still_holds(looked_at.otherwise, present):
        changed = prepared.basis.changed(present) or ("what was left in the controller",)
        raise BasisChanged(changed, "record the installation again")


def _check_time(request: InstallationRequest, content: SignedContent, now: datetime) -> None:
    if request.installed_at > now + CLOCKS_APART:
        raise FieldErrors((FieldProblem("/installed_at", "this time is yet to come"),))
    runs_already = content.kind in lifecycle.IN_FORCE_FROM_THE_START
    if request.installed_at < content.submitted_at - CLOCKS_APART and not runs_already:
        raise FieldErrors((FieldProblem("/installed_at", "these gains were not yet submitted then"),))


def _held(content: SignedContent, request: InstallationRequest) -> tuple[_Held, ...]:
    """Hold what was typed against the approved sets that it is for."""
    if request.gain_sets is None:
        assert request.as_found is not None  # noqa: S101  the document has both or gain sets
        assert request.as_left is not None  # noqa: S101  the same
        index = _only_set(content, request.as_left)
        return (_against(content, index, request.as_found, request.as_left),)
    indices = {
        loops.matching_key(gain_set.condition or ""): index
        for index, gain_set in enumerate(content.gain_sets)
        if gain_set.condition is not None
    }
    held, problems = [], []
    for place, typed in enumerate(request.gain_sets):
        found = indices.pop(loops.matching_key(typed.condition), None)
        if found is None:
            detail = "this is no condition of the approved sets, or stands here twice"
            problems.append(FieldProblem(f"/gain_sets/{place}/condition", detail))
        else:
            held.append(_against(content, found, typed.as_found, typed.as_left))
    if problems:
        raise FieldErrors(tuple(problems))
    return tuple(held)


def _only_set(content: SignedContent, as_left: Controller) -> int:
    """Return the one set that a bare controller can be: nobody guesses which of several was mistyped."""
    if len(content.gain_sets) == 1:
        return 0
    loop_ranges = loops.ranges(content.loop)
    same = [
        index
        for index, gain_set in enumerate(content.gain_sets)
        if comparison.same_gains(gain_set.controller, as_left, loop_ranges)
    ]
    if len(same) != 1:
        detail = "gains were approved for several conditions: say in gain_sets for which one these are"
        raise FieldErrors((FieldProblem("/as_left", detail),))
    return same[0]


def _against(content: SignedContent, index: int, as_found: Controller, as_left: Controller) -> _Held:
    approved = content.gain_sets[index]
    differences = comparison.differences(approved.controller, as_left, loops.ranges(content.loop))
    return _Held(index, as_found, as_left, _of_set(approved, differences))


def _of_set(approved: SignedGains, differences: tuple[Difference, ...]) -> tuple[Difference, ...]:
    return tuple(replace(difference, condition=approved.condition) for difference in differences)


def _all_sets_left(
    content: SignedContent, earlier: dict[int, InstallationContent], held: tuple[_Held, ...]
) -> bool:
    """Say whether each set was left as approved when it was looked at last."""
    left = {each.gain_set: each.as_approved for done in earlier.values() for each in done.sets_left()}
    left |= {each.gain_set: each.left.as_approved for each in held}
    return len(left) == len(content.gain_sets) and all(left.values())


def _earlier(session: Session, submission_id: str) -> dict[int, InstallationContent]:
    """Return a submission's installations in order, each by the number of its entry."""
    rows = session.execute(_OF_SUBMISSION, {"submission_id": submission_id}).scalars()
    return {row.event_number: read_installation(row.content) for row in rows}


def _content(
    session: Session,
    actor: Actor,
    looked_at: _LookedAt,
    request: InstallationRequest,
    recomputed: RecomputedAsLeft | None,
    now: datetime,
) -> InstallationContent:
    submission, held = looked_at.submission, looked_at.held
    return InstallationContent(
        installation_id=uuid4().hex,
        submission_id=submission.id,
        gain_set=held[0].gain_set,
        gain_sets=tuple(each.left for each in held),
        recorded_by=signing.person(actor),
        recorded_at=now,
        installation=request,
        as_approved=all(each.left.as_approved for each in held),
        before_approval=_before_approval(session, submission, request),
        differences=tuple(difference for each in held for difference in each.differences),
        as_found_differences=_as_found(session, submission, looked_at.content, held),
        as_left_recomputed=recomputed,
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
    session: Session, submission: Submission, content: SignedContent, held: tuple[_Held, ...]
) -> tuple[Difference, ...] | None:
    """Hold as found against what ran before these gains, as far as is recorded."""
    running = states.running(session, submission.loop_id)
    if running is None:
        return None
    if running.submission_id == submission.id:
        before = content.gains_in_force.gain_sets if content.gains_in_force else None
    else:
        before = _read(session, running.submission_id).gain_sets
    if before is None:
        return None
    return tuple(difference for each in held for difference in _found(content, before, each))


def _found(content: SignedContent, before: tuple[SignedGains, ...], held: _Held) -> tuple[Difference, ...]:
    """Hold one set as found against the set of its condition, else against the nearest one."""
    approved, loop_ranges = content.gain_sets[held.gain_set], loops.ranges(content.loop)
    named = [each for each in before if each.condition is not None and each.condition == approved.condition]
    found = (
        comparison.differences(gain_set.controller, held.as_found, loop_ranges)
        for gain_set in named or before
    )
    nearest = min(found, key=lambda differences: sum(difference.hinders for difference in differences))
    return _of_set(approved, nearest)


def _read(session: Session, submission_id: str) -> SignedContent:
    return present_content.present(session, session.get_one(Submission, submission_id)).read()


def _keep(
    session: Session, actor: Actor, looked_at: _LookedAt, content: InstallationContent, outcome: Outcome
) -> InstallationView:
    kept = canonical_bytes(plain(content))
    row = Installation(
        id=content.installation_id,
        submission_id=content.submission_id,
        ordinal=looked_at.earlier,
        recorded_by=actor.account_id,
        recorded_at=content.recorded_at,
        as_approved=content.as_approved,
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    told = {field.name: getattr(content, field.name) for field in fields(content)}
    told["as_left_recomputed"] = as_left.told(content.as_left_recomputed)
    entry = history.append(
        session,
        kind="gains_installed" if content.as_approved else "gains_installed_otherwise",
        actor=actor,
        about=loops.about(*loops.present(session, looked_at.submission.loop_id)),
        content={"installation": told, "supersedes": outcome.superseded},
        now=content.recorded_at,
        rows=(row, looked_at.state, *outcome.rows),
    )
    return InstallationView(installation=content, entry=entry)
